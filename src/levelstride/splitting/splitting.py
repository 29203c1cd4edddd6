"""A splitting: every term of the catalogue with its treatment."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from levelstride.errors import InputError
from levelstride.operator.terms import CATALOGUE
from levelstride.splitting.groups import GROUPS, TREATMENTS, WHOLE


@dataclass(frozen=True)
class Splitting:
    """Every term with its treatment.

    Attributes
    ----------
    name : str
        As the user gave it, in standard spelling.
    treatment : mapping of str to str
        Complete: one of ``TREATMENTS`` for every term of the catalogue.
    """

    name: str
    treatment: Mapping[str, str]

    def terms(self, treatment: str) -> tuple[str, ...]:
        """Names of the terms with this treatment, in catalogue order."""
        return tuple(term for term in CATALOGUE if self.treatment[term] == treatment)

    @property
    def implicit(self) -> frozenset[str]:
        """The fast terms."""
        return frozenset(self.terms("implicit"))

    def with_treatment(self, term: str, treatment: str) -> Splitting:
        """Return the splitting with one term treated differently."""
        mapping = {**self.treatment, term: treatment}
        return Splitting(f"{self.name}, {term} {treatment}", MappingProxyType(mapping))

    def without_implicit(self) -> Splitting:
        """Return it, under its own name, as an explicit tableau takes it: fast terms explicit."""
        mapping = {**self.treatment, **dict.fromkeys(self.implicit, "explicit")}
        return Splitting(self.name, MappingProxyType(mapping))


def resolve(given: str | Mapping[str, str], *, where: str = "split") -> Splitting:
    """Turn what a user wrote into a splitting.

    Parameters
    ----------
    given : str or mapping
        Groups and single terms joined by ``+``, ``all-explicit``, ``all-implicit``; or a mapping
        of term to treatment, terms left out being explicit. A mapping may carry the key ``name``
        with such a list, which the other keys then change.
    where : str
        File and key for the message.

    Raises
    ------
    InputError
        If a name or treatment is unknown; every mistake on a line of its own.
    """
    if isinstance(given, str):
        return _from_text(given, where)
    base = str(given.get("name", "all-explicit"))
    splitting = _from_text(base, where)
    treatment, problems = dict(splitting.treatment), []
    for key, value in given.items():
        if key == "name":
            continue
        term = _standard(key)
        if term not in CATALOGUE:
            problems.append(_unknown(where, key, "term", tuple(CATALOGUE)))
        elif _standard(value) not in TREATMENTS:
            problems.append(_unknown(f"{where}.{key}", value, "treatment", TREATMENTS))
        else:
            treatment[term] = _standard(value)
    if problems:
        raise InputError(*problems)
    changes = [
        f"{term} {treatment[term]}"
        for term in CATALOGUE
        if treatment[term] != splitting.treatment[term]
    ]
    name = ", ".join([splitting.name, *changes]) if changes else splitting.name
    return Splitting(name, MappingProxyType(treatment))


def _from_text(text: str, where: str) -> Splitting:
    parts = list(dict.fromkeys(_standard(part) for part in text.split("+")))
    fast: set[str] = set()
    problems = []
    for part in parts:
        if part in WHOLE and len(parts) == 1:
            fast |= set(WHOLE[part])
        elif part in GROUPS:
            fast |= set(GROUPS[part])
        elif part in CATALOGUE:
            fast.add(part)
        elif part in WHOLE:
            problems.append(
                f"{where}: '{part}' in '{text}' stands alone; leave out the other names"
            )
        else:
            known = tuple(dict.fromkeys((*GROUPS, *WHOLE, *CATALOGUE)))
            problems.append(_unknown(where, part, "group or term", known))
    if problems:
        raise InputError(*problems)
    treatment = {term: "implicit" if term in fast else "explicit" for term in CATALOGUE}
    return Splitting("+".join(parts), MappingProxyType(treatment))


def _standard(text: str) -> str:
    return "-".join(str(text).strip().lower().replace("_", " ").replace("-", " ").split())


def _unknown(where: str, got: str, what: str, known: tuple[str, ...]) -> str:
    nearest = difflib.get_close_matches(_standard(got), known, n=1, cutoff=0.3)
    hint = f"the nearest is '{nearest[0]}'; " if nearest else ""
    return f"{where}: unknown {what} '{got}'; {hint}known are {', '.join(known)}"
