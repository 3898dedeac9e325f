"""Getting the solver ready, with a word to whoever waits while it compiles."""

from __future__ import annotations

from kickrender.cli.settings import note


def ready_solver() -> None:
    """Load the solver; the first run on a machine compiles it, which takes long enough to say so."""
    from kickrender import engine

    if not engine.is_compiled():
        note("compiling the solver for this machine (the first run only, up to a minute) ...")
        from kickrender.sound.warm_up import warm_up

        warm_up()
