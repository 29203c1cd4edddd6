"""How one IMEX step of a column is taken."""

from levelstride.stepper.imex import Counts, Stepper, warm_up

__all__ = ["Counts", "Stepper", "warm_up"]
