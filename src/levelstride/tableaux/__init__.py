"""Time schemes as data: the library of tableaux, a user's own, and the audit they all pass."""

from levelstride.tableaux.audit import Audit, audit
from levelstride.tableaux.lookup import find, names
from levelstride.tableaux.tableau import Tableau
from levelstride.tableaux.user_file import read_file

__all__ = ["Audit", "Tableau", "audit", "find", "names", "read_file"]
