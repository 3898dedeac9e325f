"""Getting the solver ready, with a word to whoever waits while it compiles."""

from __future__ import annotations

from kickrender.cli.settings import note


def ready_solver() -> None:
    """Compile the solver when it is not on disk yet: the first run on a machine, which takes long enough to say so."""
    from kickrender.sound.warm_up import is_compiled, warm_up

    if not is_compiled():
        note("compiling the solver for this machine (the first run only, up to a minute) ...")
        warm_up()
