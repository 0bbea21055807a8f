"""Trained models, kept between runs as the few numbers that they learned.

What is kept is JSON: parameters, blend weights, calibration. The model itself is rebuilt from the
packaged tables, so that nothing from outside is ever executed; a file that does not match the
hash of tables, format, settings and libraries is ignored and written anew.
"""

import json
import os
from pathlib import Path
from typing import Any

from features.size_gap import training_rows
from screening.calibration import GroupCalibration
from screening.dots import SizeGapModel, State
from screening.fingerprint import model_fingerprint, tables_hash
from screening.outputs import write_atomically

__all__ = ["DOT_TABLES", "cache_folder", "dot_fingerprint", "evidence_hash", "trained_dots"]

DOT_TABLES = (
    "bulk_semiconductors",
    "computed_dots",
    "size_gap_records",
    "stokes_shifts",
    "tight_binding",
)


def cache_folder() -> Path:
    """Return the folder of kept models: ``FEWNM_CACHE`` or the user's cache folder."""
    given = os.environ.get("FEWNM_CACHE")
    if given:
        return Path(given)
    from platformdirs import user_cache_path  # noqa: PLC0415 - needed only without the variable

    return user_cache_path("fewnm")


def dot_fingerprint(seed: int = 0) -> str:
    """Return the hash of what the emission-track model follows from."""
    return model_fingerprint(DOT_TABLES, {"track": "emission", "seed": seed})


def evidence_hash() -> str:
    """Return the hash that figures of accuracy must carry to belong to this model.

    Unlike the fingerprint of a kept model it leaves out the versions of libraries.
    """
    return tables_hash(DOT_TABLES)[:16]


def trained_dots(seed: int = 0) -> SizeGapModel:
    """Return the emission-track model, learned now or rebuilt from what was kept.

    Parameters
    ----------
    seed : int, default 0

    Returns
    -------
    SizeGapModel
        Fitted and calibrated.
    """
    path = cache_folder() / f"emission-{dot_fingerprint(seed)[:24]}.json"
    kept = _read(path)
    if kept is not None:
        return _rebuild(kept, seed)
    model = SizeGapModel(seed).fit(training_rows()).calibrate()
    _keep(path, model)
    return model


def _read(path: Path) -> dict[str, Any] | None:
    try:
        kept = json.loads(path.read_text(encoding="utf-8"))
        theta = {name: [float(v) for v in values] for name, values in kept["theta"].items()}
        states = {name: _state(name, part) for name, part in kept["states"].items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        return None
    return {"theta": theta, "states": states}


def _state(name: str, part: dict[str, Any]) -> State:
    factors = {float(level): float(value) for level, value in part["factors"].items()}
    calibration = GroupCalibration.from_factors(
        factors, int(part["n_groups"]), state=f"state {name!r}"
    )
    return State(float(part["gaussian_weight"]), calibration)


def _rebuild(kept: dict[str, Any], seed: int) -> SizeGapModel:
    model = SizeGapModel(seed).fit(training_rows(), theta=kept["theta"])
    model.states_ = kept["states"]
    return model


def _keep(path: Path, model: SizeGapModel) -> None:
    """Write what was learned; a cache that cannot be written costs time, not the answer."""
    states = {
        name: {
            "gaussian_weight": state.gaussian_weight,
            "n_groups": state.calibration.n_groups_,
            "factors": {str(level): value for level, value in state.calibration.factors_.items()},
        }
        for name, state in model.states_.items()
    }
    theta = {name: model.regressor(name).gaussian_.theta_.tolist() for name in states}
    kept = {"theta": theta, "states": states}
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        write_atomically(path, json.dumps(kept, indent=1))
    except OSError:
        return
