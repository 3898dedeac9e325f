"""What a person mistyped, told the way kickrender tells every fault: place, what was found, what is allowed."""

from __future__ import annotations

import click

from kickrender.errors import Fault, InputError, nearest_name


class Commands(click.Group):
    """A group that names the nearest command when one is misspelt."""

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        name, known = args[0], self.list_commands(ctx)
        if name not in known and not name.startswith("-"):
            raise InputError(
                Fault(ctx.command_path, f"unknown command '{name}'", ", ".join(known), nearest_name(name, known))
            )
        return super().resolve_command(ctx, args)


def fault_of(error: click.UsageError) -> Fault:
    """The fault behind one of click's usage errors."""
    context = error.ctx
    place = context.command_path if context else "kickrender"
    if isinstance(error, click.NoSuchOption):
        options = _options(context)
        return Fault(
            place, f"unknown option '{error.option_name}'", ", ".join(options), nearest_name(error.option_name, options)
        )
    if isinstance(error, click.MissingParameter) and error.param is not None and context is not None:
        name = error.param.opts[0] if isinstance(error.param, click.Option) else error.param.human_readable_name.upper()
        return Fault(place, f"{name} is missing", context.get_usage().removeprefix("Usage: "))
    if isinstance(error, click.BadParameter) and error.param is not None:
        return Fault(f"{place}, {error.param.opts[0]}", error.message.rstrip(".").strip())
    return Fault(place, error.format_message().rstrip("."))


def _options(context: click.Context | None) -> list[str]:
    if context is None:
        return []
    return [name for parameter in context.command.get_params(context) for name in parameter.opts if name[:1] == "-"]
