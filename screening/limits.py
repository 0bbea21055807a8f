"""Practical limits: every candidate passes, fails or stays unsure, with a chance and a reason.

A check holds, for every row of a frame of candidates, the chance that the limit is met (NaN where
nothing is on record) and a function that puts the reason of one row into words, so that a million
rows cost no text.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import ndtr

from screening.covariance import FloatArray
from screening.limit_check import Check
from screening.limit_composition import composition_checks
from screening.limit_physics import physics_checks
from screening.limit_rules import Limits

__all__ = ["FAIL", "PASS", "REJECTED", "UNSURE", "Judgement", "check_limits", "judge"]

PASS, UNSURE, FAIL = 0, 1, 2
REJECTED = (
    "material",
    "reason",
    "limit",
    "verdict",
    "chance",
    "n_rejected",
    "n_sizes",
    "diameter_nm",
    "chance_in_window",
)
"""Columns of the list of refused candidates: chance is that of meeting the limit."""
_WORDS = ("pass", "unsure", "fail")


@dataclass(frozen=True)
class Judgement:
    """What the limits say of each candidate.

    Parameters
    ----------
    checks : tuple of Check
        One a limit that was asked.
    verdicts : ndarray of int8, shape (n_checks, n_rows)
        `PASS`, `UNSURE` or `FAIL`.
    limits : Limits
    """

    checks: tuple[Check, ...]
    verdicts: NDArray[np.int8]
    limits: Limits

    @property
    def allowed(self) -> NDArray[np.bool_]:
        """Whether each row may be listed."""
        worst = UNSURE if self.limits.unsure == "keep" else PASS
        return np.asarray((self.verdicts <= worst).all(axis=0))

    def notes(self, rows: Sequence[int]) -> list[str]:
        """Return for each row what is unsure, or that all limits are met."""
        return [self._note(row) for row in rows]

    def _note(self, row: int) -> str:
        if not self.checks:
            return "no limits asked"
        open_ = [
            f"unsure: {check.limit}{_chance_text(check.chance[row])}: {check.words(row)}"
            for check, verdict in zip(self.checks, self.verdicts[:, row], strict=True)
            if verdict == UNSURE
        ]
        return "; ".join(open_) or "all limits met"

    def rejected(self, frame: pd.DataFrame) -> pd.DataFrame:
        """List what was refused: one row a material and limit, sizes together.

        Parameters
        ----------
        frame : pandas.DataFrame
            The candidates that were checked; columns material, diameter_nm, chance_in_window.

        Returns
        -------
        pandas.DataFrame
            Columns `REJECTED`; size, chances and words are those of the refused row with the
            highest chance in the window.
        """
        worst = UNSURE if self.limits.unsure == "keep" else PASS
        parts = [
            _refused(frame, check, verdict, worst)
            for check, verdict in zip(self.checks, self.verdicts, strict=True)
        ]
        return pd.DataFrame([row for part in parts for row in part], columns=list(REJECTED))


def _chance_text(chance: float) -> str:
    return "" if np.isnan(chance) else f" (chance {chance:.2f})"


def _refused(
    frame: pd.DataFrame, check: Check, verdict: NDArray[np.int8], worst: int
) -> list[dict[str, Any]]:
    table = pd.DataFrame(
        {"material": frame["material"].to_numpy(), "hit": frame["chance_in_window"].to_numpy()}
    )
    sizes = table["material"].value_counts()
    refused = table[verdict > worst]
    n_refused = refused["material"].value_counts()
    best = refused.sort_values("hit", ascending=False, kind="stable").drop_duplicates("material")
    diameter = frame["diameter_nm"].to_numpy()
    return [
        {
            "material": name,
            "limit": check.limit,
            "verdict": _WORDS[verdict[at]],
            "chance": check.chance[at],
            "n_rejected": int(n_refused[name]),
            "n_sizes": int(sizes[name]),
            "diameter_nm": diameter[at],
            "chance_in_window": hit,
            "reason": check.words(at),
        }
        for at, name, hit in sorted(best.itertuples(), key=lambda row: str(row[1]))
    ]


def check_limits(frame: pd.DataFrame, limits: Limits) -> tuple[Check, ...]:
    """Evaluate every limit that is asked on every candidate.

    Parameters
    ----------
    frame : pandas.DataFrame
        Candidates with material and diameter_nm, optionally structure; fwhm_meV and
        size_tolerance_nm where the limits ask for them.
    limits : Limits

    Returns
    -------
    tuple of Check
        In the order of the specification's keys.
    """
    asked = set(limits.asked())
    checks: list[Callable[[pd.DataFrame, Limits], Check]] = [
        make
        for name, make in {**_plain_checks(), **composition_checks(), **physics_checks()}.items()
        if name in asked
    ]
    return tuple(make(frame, limits) for make in checks)


def judge(frame: pd.DataFrame, limits: Limits) -> Judgement:
    """Judge every candidate by every limit that is asked.

    Parameters
    ----------
    frame, limits
        As for `check_limits`.

    Returns
    -------
    Judgement
    """
    checks = check_limits(frame, limits)
    verdicts = np.full((len(checks), len(frame)), UNSURE, dtype=np.int8)
    for at, check in enumerate(checks):
        sure = float(ndtr(limits.margin_sigmas)) if check.in_sigmas else limits.sure_at
        verdicts[at, check.chance >= sure] = PASS
        verdicts[at, check.chance < min(1.0 - sure, sure) + 1e-12] = FAIL
    return Judgement(checks, verdicts, limits)


def _plain_checks() -> dict[str, Callable[[pd.DataFrame, Limits], Check]]:
    return {
        "diameter_nm": _diameter,
        "highest_fwhm_meV": _linewidth,
        "least_size_tolerance_nm": _tolerance,
    }


def _sure(met: NDArray[np.bool_]) -> FloatArray:
    return met.astype(np.float64)


def _diameter(frame: pd.DataFrame, limits: Limits) -> Check:
    low, high = limits.diameter_nm or [0.0, np.inf]
    d = frame["diameter_nm"].to_numpy(dtype=np.float64)
    met = (d >= low - 1e-9) & (d <= high + 1e-9)
    return Check("diameter_nm", _sure(met), lambda at: f"{d[at]:g} nm, allowed {low:g} to {high:g}")


def _linewidth(frame: pd.DataFrame, limits: Limits) -> Check:
    limit = limits.highest_fwhm_meV or np.inf
    width = frame["fwhm_meV"].to_numpy(dtype=np.float64)
    return Check(
        "highest_fwhm_meV",
        _sure(width <= limit),
        lambda at: f"linewidth {width[at]:.0f} meV, allowed {limit:g}",
    )


def _tolerance(frame: pd.DataFrame, limits: Limits) -> Check:
    limit = limits.least_size_tolerance_nm or 0.0
    room = frame["size_tolerance_nm"].to_numpy(dtype=np.float64)
    return Check(
        "least_size_tolerance_nm",
        _sure(room >= limit),
        lambda at: f"room of {room[at]:.2f} nm, wanted {limit:g}",
    )
