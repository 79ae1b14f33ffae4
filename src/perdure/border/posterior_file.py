"""``posterior.nc``: an ArviZ DataTree with named draws, sampler statistics and the flat vectors behind them.

Groups: ``posterior`` (named, with units), ``sample_stats``, ``coordinates`` (flat vectors in the order of the model). What
a prediction needs to lay the law out again stands in the attributes of the file, so that nothing else has to be read.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from perdure.border.store import atomic_path
from perdure.errors import ResultError, problem
from perdure.inference.density import Density
from perdure.inference.priors import Layout
from perdure.predictions.draws import PosteriorDraws
from perdure.rheology.laws import LAWS

Array = NDArray[np.float64]

FORMAT = 1


@dataclass(frozen=True, slots=True, eq=False)
class PosteriorFile:
    """What ``posterior.nc`` holds.

    Attributes:
        draws: of the material's part of the model, chains joined.
        flat: (chain, draw, n). names: of its places, (n,).
        statistics: of the sampler.
        records_sha256: digest of the records that were fitted.
        released: False where the convergence gate failed.
    """

    draws: PosteriorDraws
    flat: Array
    names: tuple[str, ...]
    statistics: xr.Dataset
    records_sha256: str
    released: bool


def _named(density: Density, flat: Array) -> xr.Dataset:
    structure, packing = density.structure, density.packing
    modes, shapes = len(structure.modes), structure.shape_size
    chains, draws, _ = flat.shape
    at = packing.root
    batch = flat[:, :, at : at + packing.batches * modes].reshape(chains, draws, packing.batches, modes)
    at += packing.batches * modes
    own = np.zeros((chains, draws, *packing.mask.shape))
    own[:, :, packing.mask] = flat[:, :, at : at + int(packing.size.sum())]
    at += int(packing.size.sum())
    effects = np.concatenate([flat[:, :, 1 + shapes : packing.root], own[:, :, :, modes:][:, :, packing.mask[:, modes:]]], axis=2)
    noise = np.exp(flat[:, :, at + 2 * modes :]).reshape(chains, draws, packing.instruments, packing.noise)
    effect_names = [effect.name for effect in structure.root_effects]
    effect_names += [effect.name for own_effects in structure.local_effects for effect in own_effects]
    lead = ("chain", "draw")
    return xr.Dataset(
        {
            "stiffness": (lead, flat[:, :, 0], {"unit": "1", "about": "ln of the population's modulus in MPa at the reference time"}),
            "shape": ((*lead, "shape_name"), flat[:, :, 1 : 1 + shapes], {"unit": "1", "about": "shape coordinates of the law"}),
            "batch_offset": ((*lead, "batch", "mode"), batch, {"unit": "1", "about": "batch minus population"}),
            "specimen_offset": ((*lead, "specimen", "mode"), own[:, :, :, :modes], {"unit": "1", "about": "specimen minus batch"}),
            "batch_sd": ((*lead, "mode"), flat[:, :, at : at + modes], {"unit": "1", "about": "scatter sd between batches"}),
            "specimen_sd": ((*lead, "mode"), flat[:, :, at + modes : at + 2 * modes], {"unit": "1", "about": "scatter sd within a batch"}),
            "effect": ((*lead, "effect_name"), effects, {"unit": "1", "about": "standardised type B effects"}),
            "noise": ((*lead, "instrument", "noise_name"), noise, {"unit": "MPa (or ratio) and 1", "about": "sd of one reading"}),
        },
        coords={
            "shape_name": list(structure.law.shape_names),
            "batch": list(structure.batches),
            "specimen": list(structure.specimens),
            "mode": list(structure.modes),
            "effect_name": effect_names,
            "instrument": list(structure.instruments),
            "noise_name": list(density.noise.parameter_names),
        },
    )


def write_posterior(  # noqa: PLR0913 - one argument a part of the file
    path: Path,
    *,
    density: Density,
    layout: Layout,
    flat: Array,
    names: tuple[str, ...],
    statistics: xr.Dataset,
    records_sha256: str,
    released: bool,
    provenance: dict[str, Any],
) -> None:
    """Write the file atomically; ``provenance`` goes into the attributes as JSON."""
    structure = density.structure
    law = structure.law
    head = {
        "format": FORMAT,
        "law": law.name,
        "times": np.asarray(law.times, dtype=np.float64).tolist(),
        "equilibrium": bool(law.equilibrium),
        "free": bool(law.free),
        "reference_time": float(layout.reference_time),
        "horizon": float(layout.horizon),
        "shortest": float(layout.shortest),
        "longest": float(layout.longest),
        "batch of specimen": structure.batch.tolist(),
        "records sha256": records_sha256,
        "released": released,
        **provenance,
    }
    tree = xr.DataTree.from_dict(
        {
            "/": xr.Dataset(attrs={"perdure": json.dumps(head, sort_keys=True)}),
            "posterior": _named(density, flat),
            "sample_stats": statistics,
            "coordinates": xr.Dataset({"x": (("chain", "draw", "name"), flat)}, coords={"name": list(names)}),
        }
    )
    with atomic_path(path) as temporary:
        tree.to_netcdf(temporary, engine="h5netcdf")


def read_posterior(path: Path) -> PosteriorFile:
    """Read what :func:`write_posterior` wrote.

    Raises:
        ResultError: when the file is missing, damaged or of another format.
    """
    try:
        with xr.open_datatree(path, engine="h5netcdf") as tree:
            head = json.loads(tree.attrs["perdure"])
            named = tree["posterior"].to_dataset().load()
            statistics = tree["sample_stats"].to_dataset().load()
            flat_data = tree["coordinates"].to_dataset().load()
    except (OSError, KeyError, ValueError) as error:
        raise ResultError(
            [problem(str(path), f"{type(error).__name__}: {error}", "a posterior of this format", "Run the fit again.")]
        ) from error
    if head.get("format") != FORMAT:
        raise ResultError([problem(str(path), f"format {head.get('format')}", f"format {FORMAT}", "Run the fit again.")])
    law = LAWS[head["law"]](np.array(head["times"]), head["equilibrium"], head["reference_time"], head["free"])
    modes = tuple(str(name) for name in named["mode"].to_numpy())

    def joined(name: str) -> Array:
        values = np.asarray(named[name].to_numpy(), dtype=np.float64)
        return values.reshape(-1, *values.shape[2:])

    draws = PosteriorDraws(
        law=law,
        modes=modes,
        mode_index=np.array([law.mode_names.index(mode) for mode in modes], dtype=np.int64),
        batches=tuple(str(name) for name in named["batch"].to_numpy()),
        specimens=tuple(str(name) for name in named["specimen"].to_numpy()),
        batch=np.array(head["batch of specimen"], dtype=np.int64),
        stiffness=joined("stiffness"),
        shape=joined("shape"),
        batch_offset=joined("batch_offset"),
        specimen_offset=joined("specimen_offset"),
        batch_sd=joined("batch_sd"),
        specimen_sd=joined("specimen_sd"),
        chains=int(named.sizes["chain"]),
    )
    return PosteriorFile(
        draws,
        np.asarray(flat_data["x"].to_numpy()),
        tuple(str(name) for name in flat_data["name"].to_numpy()),
        statistics,
        str(head["records sha256"]),
        bool(head["released"]),
    )
