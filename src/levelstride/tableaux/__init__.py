"""Time schemes as data: the library of tableaux, a user's own, and the audit they all pass."""

from levelstride.tableaux.library import find, names
from levelstride.tableaux.tableau import Tableau

__all__ = ["Tableau", "find", "names"]
