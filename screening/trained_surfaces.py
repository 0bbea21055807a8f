"""The trained model of adsorption energies, kept between runs as the numbers that it learned.

As in `screening.trained`: JSON only, rebuilt from the packaged tables, ignored and written anew
where its hash does not match.
"""

import json
from functools import lru_cache
from pathlib import Path

from screening.adsorption import AdsorptionModel
from screening.fingerprint import model_fingerprint
from screening.outputs import write_atomically
from screening.trained import cache_folder

__all__ = ["SURFACE_TABLES", "surface_fingerprint", "trained_surfaces"]

SURFACE_TABLES = (
    "adsorption_pure",
    "adsorption_alloys",
    "adsorption_ensembles",
    "metals",
    "scaling_relations",
    "free_energy_corrections",
    "reactions",
    "metal_surfaces",
)


def surface_fingerprint() -> str:
    """Return the hash of what the model of adsorption energies follows from."""
    return model_fingerprint(SURFACE_TABLES, {"track": "surfaces"})


@lru_cache(maxsize=1)
def trained_surfaces() -> AdsorptionModel:
    """Return the model, learned now or rebuilt from what was kept; once a process.

    Returns
    -------
    AdsorptionModel
        Fitted and calibrated.
    """
    path = cache_folder() / f"surfaces-{surface_fingerprint()[:24]}.json"
    kept = _restored(path)
    if kept is not None:
        return kept
    model = AdsorptionModel().fit()
    _keep(path, model)
    return model


def _restored(path: Path) -> AdsorptionModel | None:
    """Return the kept model, or None where the file is missing or holds something else."""
    try:
        return AdsorptionModel.restored(json.loads(path.read_text(encoding="utf-8")))
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        return None


def _keep(path: Path, model: AdsorptionModel) -> None:
    """Write what was learned; a cache that cannot be written costs time, not the answer."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        write_atomically(path, json.dumps(model.learned(), indent=1))
    except OSError:
        return
