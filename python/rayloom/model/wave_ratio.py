"""How S velocity changes where P velocity does: :func:`wave_ratio`."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.model.fields import FieldDescription
from rayloom.model.grid import BlockGrid
from rayloom.model.slowness import SlownessModel

if TYPE_CHECKING:
    import xarray

Floats = NDArray[np.float64]

_DESCRIPTIONS: Final = {
    "dlnvs_dlnvp": FieldDescription(
        "1", "d ln vs / d ln vp, relative changes from the reference model"
    ),
    "vp_vs": FieldDescription("1", "ratio of P to S velocity"),
    "vp_vs_reference": FieldDescription("1", "ratio of P to S velocity of the reference model"),
    "dvp": FieldDescription("percent", "P-wave velocity perturbation"),
    "dvs": FieldDescription("percent", "S-wave velocity perturbation"),
    "hits_p": FieldDescription("1", "number of P rays through the block"),
    "hits_s": FieldDescription("1", "number of S rays through the block"),
}


@dataclass(frozen=True, eq=False)
class WaveRatio:
    """P and S models of the same blocks side by side.

    Attributes
    ----------
    grid : BlockGrid
        The blocks.
    dlnvs_dlnvp : ndarray, shape (nx, ny, nz)
        ln(vs/vs_ref) / ln(vp/vp_ref); NaN outside `resolved`.
    vp_vs : ndarray, shape (nx, ny, nz)
        Ratio of the velocities; NaN where a wave has too few rays.
    vp_vs_reference : ndarray, shape (nx, ny, nz)
        The same of the reference models.
    resolved : ndarray of bool, shape (nx, ny, nz)
        Where the ratio is given.
    p_model, s_model : SlownessModel
        The two models.
    min_hits, min_percent : float
        What `resolved` asks for.
    """

    grid: BlockGrid
    dlnvs_dlnvp: Floats
    vp_vs: Floats
    vp_vs_reference: Floats
    resolved: NDArray[np.bool_]
    p_model: SlownessModel
    s_model: SlownessModel
    min_hits: int
    min_percent: float

    @property
    def median(self) -> float:
        """Median of the ratio over the resolved blocks; NaN if there are none."""
        values = self.dlnvs_dlnvp[self.resolved]
        return float(np.median(values)) if values.size else float("nan")

    def to_dataset(self) -> xarray.Dataset:
        """Return the ratio as an xarray dataset with CF-1.8 metadata.

        Returns
        -------
        xarray.Dataset
            Dimensions (depth, y, x); variables ``dlnvs_dlnvp``, ``vp_vs``,
            ``vp_vs_reference``, ``dvp``, ``dvs``, ``hits_p``, ``hits_s``.
        """
        from rayloom.model.dataset import block_dataset

        values = {
            "dlnvs_dlnvp": self.dlnvs_dlnvp,
            "vp_vs": self.vp_vs,
            "vp_vs_reference": self.vp_vs_reference,
            "dvp": self.p_model.perturbation_percent,
            "dvs": self.s_model.perturbation_percent,
            "hits_p": self.p_model.fields["hits"],
            "hits_s": self.s_model.fields["hits"],
        }
        return block_dataset(
            self.grid,
            {name: (array, _DESCRIPTIONS[name]) for name, array in values.items()},
            title="S-wave and P-wave velocity of the Earth in blocks, compared",
            resolved=f"dlnvs_dlnvp is given where P and S each have {self.min_hits} rays or more "
            f"and dvp is {self.min_percent:g} percent or more in size",
        )

    def write_netcdf(self, path: str | Path) -> None:
        """Write the dataset to a netCDF file, whole or not at all.

        Parameters
        ----------
        path : str or Path
            The file.

        Raises
        ------
        FileAccessError
            If the file cannot be written.
        """
        from rayloom.model.netcdf import write_dataset

        write_dataset(self.to_dataset(), Path(path))


def wave_ratio(
    p_model: SlownessModel,
    s_model: SlownessModel,
    *,
    min_hits: int = 5,
    min_percent: float = 0.5,
) -> WaveRatio:
    """Compare the P and the S model of the same blocks.

    Parameters
    ----------
    p_model, s_model : SlownessModel
        Models of P and S waves with the field ``hits``, in the same blocks.
    min_hits : int
        Rays of either wave that a block must have.
    min_percent : float
        Size of dVp that a block must have, percent; the ratio of two small numbers
        says nothing.

    Returns
    -------
    WaveRatio
        Where both conditions hold the ratio is given. The mask tells where rays are,
        not how well they resolve; as either model is relative to a regional mean of its
        own, so is the ratio. It is biased where P and S are damped unequally: expected
        sizes of station terms in s should be larger for S, as their delays are.

    Raises
    ------
    InputError
        If the waves or blocks do not fit, or a model does not tell its hits.
    """
    _require_pair(p_model, s_model)
    covered = (p_model.fields["hits"] >= min_hits) & (s_model.fields["hits"] >= min_hits)
    change_p = np.log(p_model.reference / p_model.slowness_s_per_km)
    change_s = np.log(s_model.reference / s_model.slowness_s_per_km)
    large = np.abs(p_model.perturbation_percent) >= min_percent
    resolved = covered & large & (change_p != 0.0)
    ratio = np.full(p_model.grid.shape, np.nan)
    ratio[resolved] = change_s[resolved] / change_p[resolved]
    vp_vs = s_model.slowness_s_per_km / p_model.slowness_s_per_km
    return WaveRatio(
        grid=p_model.grid,
        dlnvs_dlnvp=ratio,
        vp_vs=np.where(covered, vp_vs, np.nan),
        vp_vs_reference=np.asarray(s_model.reference / p_model.reference),
        resolved=resolved,
        p_model=p_model,
        s_model=s_model,
        min_hits=min_hits,
        min_percent=min_percent,
    )


def _require_pair(p_model: SlownessModel, s_model: SlownessModel) -> None:
    if (p_model.wave, s_model.wave) != ("P", "S"):
        raise InputError(
            f"expected a model of P and one of S waves, got {p_model.wave} and {s_model.wave}",
            where="wave",
        )
    if p_model.grid != s_model.grid:
        raise InputError(
            "the P and the S model have different blocks; invert both in the same grid",
            where="grid",
        )
    for model in (p_model, s_model):
        if "hits" not in model.fields:
            raise InputError(f"the {model.wave} model has no field hits", where="hits")
