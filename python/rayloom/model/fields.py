"""Names, units and meanings of what a model file holds per block."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from rayloom.errors import InputError


@dataclass(frozen=True)
class FieldDescription:
    """What a quantity per block is.

    Attributes
    ----------
    units : str
        Unit as udunits spells it; "1" for a pure number.
    long_name : str
        Meaning in words.
    """

    units: str
    long_name: str


KNOWN_FIELDS: Final = {
    "hits": FieldDescription("1", "number of rays through the block"),
    "ray_length_km": FieldDescription("km", "summed length of the rays in the block"),
    "sigma_dvp": FieldDescription("percent", "posterior standard deviation of dvp"),
    "sigma_dvs": FieldDescription("percent", "posterior standard deviation of dvs"),
    "data_share": FieldDescription("1", "share of the prior variance that the data take away"),
    "resolution": FieldDescription("1", "diagonal of the resolution matrix"),
}
"""Quantities that rayloom itself adds to a model."""

UNIT_OF_SUFFIX: Final = {
    "_km": "km",
    "_km_s": "km s-1",
    "_s": "s",
    "_s_per_km": "s km-1",
    "_percent": "percent",
    "_deg": "degree",
    "_km3": "km3",
}
"""Unit of a quantity that ends so, longest ending first to match."""

RESERVED_NAMES: Final = frozenset(
    [
        *("x", "y", "depth", "x_bounds", "y_bounds", "depth_bounds", "edge"),
        *("longitude", "latitude", "rotated_pole"),
        *("slowness", "slowness_reference"),
        *("vp", "vp_reference", "dvp", "vs", "vs_reference", "dvs"),
    ]
)
"""Names that a model file uses for itself."""


def describe_field(name: str) -> FieldDescription:
    """Tell unit and meaning of a quantity per block from its name.

    Parameters
    ----------
    name : str
        A known name, or any that ends in its unit (``…_km``).

    Returns
    -------
    FieldDescription
        A name that tells nothing is taken as a pure number.
    """
    if name in KNOWN_FIELDS:
        return KNOWN_FIELDS[name]
    endings = sorted(UNIT_OF_SUFFIX, key=len, reverse=True)
    unit = next((UNIT_OF_SUFFIX[end] for end in endings if name.endswith(end)), "1")
    return FieldDescription(unit, name.replace("_", " "))


def check_field_name(name: str) -> None:
    """Refuse a name that a model file cannot carry beside its own.

    Parameters
    ----------
    name : str
        Name of a quantity per block.

    Raises
    ------
    InputError
        If the name is reserved or not a plain word of letters, digits and underscores.
    """
    where = f"field {name!r}"
    if name in RESERVED_NAMES:
        raise InputError("this name belongs to the model itself; choose another", where=where)
    if not (name.isidentifier() and name.isascii()):
        raise InputError("a name holds ASCII letters, digits and underscores only", where=where)
