"""Which term is treated how."""

from levelstride.splitting.parts import Parts, split_operator
from levelstride.splitting.splitting import Splitting, resolve

__all__ = ["Parts", "Splitting", "resolve", "split_operator"]
