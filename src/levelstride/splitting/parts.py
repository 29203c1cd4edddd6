"""The operator of one column and wave, sorted into its parts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from levelstride.column.air import Background
from levelstride.column.column import Column
from levelstride.operator.bands import Banded, total
from levelstride.operator.setting import layout_of
from levelstride.operator.state import Layout
from levelstride.operator.terms import assemble
from levelstride.operator.wave import Wave
from levelstride.splitting.splitting import Splitting

BEYOND_REFERENCE = "beyond-reference"


@dataclass(frozen=True, slots=True, eq=False)
class Parts:
    """The operator sorted by treatment, in stored unknowns (see ``Layout``).

    Attributes
    ----------
    slow, fast, after, after_implicit : Banded
        Explicit and implicit in the stages, once per step by forward and by backward Euler.
    layout : Layout
    implicit_terms : frozenset of str
        Names of the fast terms that are not zero on this column.
    slow_terms : mapping of str to Banded
        What the slow part is made of, by term; what implicit terms on the air have beyond those on
        a reference state is `BEYOND_REFERENCE`. Empty where it is not known.
    fast_terms : mapping of str to Banded
        The same for the fast part.
    """

    slow: Banded
    fast: Banded
    after: Banded
    after_implicit: Banded
    layout: Layout
    implicit_terms: frozenset[str]
    slow_terms: Mapping[str, Banded] = field(default_factory=dict)
    fast_terms: Mapping[str, Banded] = field(default_factory=dict)

    @property
    def whole(self) -> Banded:
        """The operator the air itself obeys."""
        return self.slow + self.fast + self.after + self.after_implicit

    @property
    def is_real(self) -> bool:
        """Whether the step can be taken in real arithmetic."""
        parts = (self.slow, self.fast, self.after, self.after_implicit)
        return all(part.is_real for part in parts)


def split_operator(splitting: Splitting, column: Column, air: Background, wave: Wave) -> Parts:
    """Sort every term into its part.

    With a reference state the fast part is the implicit terms built on the reference, and the slow
    part is what remains of the operator on the air, so that the sum is the operator on the air.

    Parameters
    ----------
    splitting : Splitting
    column : Column
    air : Background
        The state of the column's air that is carried.
    wave : Wave
    """
    terms = assemble(column, air, wave)
    on_reference = assemble(column, column.reference, wave) if column.reference else terms
    return sort_terms(splitting, terms, on_reference, layout_of(column))


def sort_terms(
    splitting: Splitting,
    terms: Mapping[str, Banded],
    on_reference: Mapping[str, Banded],
    layout: Layout,
) -> Parts:
    """Sort assembled terms; see ``split_operator``."""
    size = layout.size

    def gather(treatment: str, source: Mapping[str, Banded]) -> Banded:
        return total(size, (source[name] for name in splitting.terms(treatment)))

    slow = gather("explicit", terms)
    fast = gather("implicit", on_reference)
    slow_terms = {name: terms[name] for name in splitting.terms("explicit")}
    if on_reference is not terms:
        slow = (slow + gather("implicit", terms) - fast).trimmed()
        slow_terms[BEYOND_REFERENCE] = (gather("implicit", terms) - fast).trimmed()
    active = frozenset(
        name for name in splitting.terms("implicit") if not on_reference[name].is_zero
    )
    after, after_implicit = gather("after-step", terms), gather("after-step-implicit", terms)
    fast_terms = {name: on_reference[name] for name in splitting.terms("implicit")}
    return Parts(slow, fast, after, after_implicit, layout, active, slow_terms, fast_terms)
