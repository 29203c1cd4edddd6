"""What may be asked about a level set besides stretching it, as work that is shared out."""

from dataclasses import dataclass

from levelstride.results.mending import LayerSensitivity, Mended
from levelstride.studies.mend import mend
from levelstride.studies.sensitivity import layer_sensitivity
from levelstride.studies.stretch_point import StretchItem, unpacked


@dataclass(frozen=True, slots=True)
class LayersItem:
    """Which layers of the user's own set cost the step."""

    of: StretchItem


@dataclass(frozen=True, slots=True)
class MendItem:
    """The nearest set that carries a step."""

    of: StretchItem
    target_s: float
    keep_lowest: bool
    largest_ratio: float | None


def layer_costs(item: LayersItem) -> LayerSensitivity:
    """Find which layers of the user's own set cost the step."""
    of = item.of
    return layer_sensitivity(
        unpacked(of.column), tableau=of.tableau, split=of.split, efolding_s=of.efolding_s
    )


def mended(item: MendItem) -> Mended:
    """Find the set nearest to the user's own that carries the target."""
    of = item.of
    return mend(
        unpacked(of.column),
        tableau=of.tableau,
        split=of.split,
        target_step_s=item.target_s,
        keep_lowest=item.keep_lowest,
        largest_ratio=item.largest_ratio,
        efolding_s=of.efolding_s,
    )
