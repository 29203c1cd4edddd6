"""Telling the user why the first run takes longer."""

from levelstride.cli.console import say_errors


def prepare_kernels() -> None:
    """Compile the step kernels if no earlier run has, and say so.

    Worker processes then find them in the cache instead of compiling them once each.
    """
    from levelstride.stepper.imex import warm_up
    from levelstride.stepper.kernels import is_compiled

    if is_compiled():
        return
    say_errors("compiling the step kernels for this machine; later runs find them in a cache ...")
    warm_up(real=True)
    warm_up(real=False)
