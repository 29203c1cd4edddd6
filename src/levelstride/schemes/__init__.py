"""Time schemes beside the library of tableaux: baselines, and compositions of two methods."""

from levelstride.schemes.lookup import find_scheme, scheme_names
from levelstride.schemes.scheme import ProgramScheme, TimeScheme

__all__ = ["ProgramScheme", "TimeScheme", "find_scheme", "scheme_names"]
