"""Tableaux written by hand, to ask the stepper what no published scheme asks."""

from dataclasses import dataclass, field

import numpy as np


@dataclass(frozen=True, eq=False)
class Handmade:
    """A pair of tables without any audit."""

    a_explicit: np.ndarray
    a_implicit: np.ndarray
    b_explicit: np.ndarray
    b_implicit: np.ndarray
    name: str = "handmade"
    kind: str = field(default="additive")


def backward_euler(diagonal=1.0, name="handmade"):
    """One explicit stage, then one solved stage that is the new state."""
    table_explicit = np.array([[0.0, 0.0], [1.0, 0.0]])
    table_implicit = np.array([[0.0, 0.0], [0.0, diagonal]])
    return Handmade(
        table_explicit, table_implicit, np.array([1.0, 0.0]), np.array([0.0, 1.0]), name
    )
