"""Bulk gap of any composition: on record, by the alloy rules, or by the model.

The first of these that knows the composition answers. All gaps at about room temperature; the
compilation behind the model does not state the temperature or whether a gap is direct.
"""

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
import pandas as pd
from scipy.special import ndtri

from features.alloys import alloy_gap
from features.charge import charge_balance, require_semiconductor
from features.errors import FormulaError, explain
from features.formula import Compound, parse_formula
from screening.bulk_gap_regressor import GapRegressor, squared_moments
from screening.bulk_gap_rows import gap_rows, recorded_gaps
from screening.covariance import FloatArray

__all__ = ["COLUMNS", "BulkGapModel"]

COLUMNS = (
    "material",
    "bulk_gap_eV",
    "bulk_gap_low_eV",
    "bulk_gap_high_eV",
    "bulk_gap_sd_eV",
    "record_state",
    "basis",
)
"""Columns of an answer; low and high are the ends of the 90 % interval."""

_LEVEL = 0.9
_Z = float(ndtri(0.5 + _LEVEL / 2.0))


def _checked(text: str) -> Compound:
    """Return the compound, or refuse a metal."""
    compound = parse_formula(text)
    require_semiconductor(compound)
    return compound


def _require_balance(compound: Compound) -> None:
    balance = charge_balance(compound)
    if not balance.balanced:
        raise FormulaError(
            explain(
                "charges do not balance",
                where=f"formula {compound.formula!r}",
                expected="oxidation states that sum to zero",
                found=f"{balance.net:+.2f} per atom at best",
                do="check the amounts; compositions on record are answered whatever their charges",
            )
        )


class BulkGapModel:
    """Bulk gap by composition with calibrated intervals.

    Parameters
    ----------
    seed : int, default 0

    Attributes
    ----------
    records_ : dict of str to RecordedGap
        Gaps on record by canonical formula.
    regressor_ : GapRegressor
    """

    def __init__(self, seed: int = 0) -> None:
        self.seed = seed

    def fit(self, rows: pd.DataFrame | None = None) -> Self:
        """Learn from tables.

        Parameters
        ----------
        rows : pandas.DataFrame or None, default None
            As from ``screening.bulk_gap_rows.gap_rows``; None for the packaged tables.

        Returns
        -------
        self
        """
        rows = gap_rows() if rows is None else rows
        self.records_ = recorded_gaps(rows)
        self.regressor_ = GapRegressor(self.seed).fit(rows)
        return self

    def predict(self, materials: Sequence[str]) -> pd.DataFrame:
        """Answer the bulk gap of each material, in the order given.

        Parameters
        ----------
        materials : sequence of str
            Formulas.

        Returns
        -------
        pandas.DataFrame
            Columns `COLUMNS`. ``record_state`` is ``"on record"`` or ``"new"``; ``basis`` is
            ``"record"``, ``"alloy"`` (end members and bowing) or ``"model"``. A negative gap on
            record means an inverted band order; the model answers at least 0.

        Raises
        ------
        FormulaError
            If a text is not a formula, all constituents are metals, or the charges of a
            composition without a record do not balance.
        """
        names = [str(text) for text in materials]
        compounds = [_checked(text) for text in names]
        answers = [self._known(compound) for compound in compounds]
        open_rows = [at for at, answer in enumerate(answers) if answer is None]
        modelled = self._modelled([compounds[at] for at in open_rows])
        for at, answer in zip(open_rows, modelled, strict=True):
            answers[at] = answer
        rows = [[name, *(answer or ())] for name, answer in zip(names, answers, strict=True)]
        return pd.DataFrame(rows, columns=list(COLUMNS))

    def check(self, material: str) -> None:
        """Raise what `predict` would raise for a material, without predicting.

        Raises
        ------
        FormulaError
            As `predict`.
        """
        compound = _checked(material)
        if self._known(compound) is None:
            _require_balance(compound)

    def predict_new(
        self, formulas: Sequence[str], level: float = _LEVEL
    ) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """Predict by the model alone, whatever is on record.

        Parameters
        ----------
        formulas : sequence of str
        level : {0.5, 0.8, 0.9}, default 0.9

        Returns
        -------
        gap_eV, low_eV, high_eV, sd_eV : ndarray of shape (n_formulas,)
            Median, ends of the central interval, standard deviation.

        Raises
        ------
        CalibrationError
            If the level was not calibrated.
        """
        root, spread = self.regressor_.predict_root(formulas)
        calibration = self.regressor_.calibration_
        low, high = calibration.interval(root, spread, level)
        sd = spread * calibration.factor(_LEVEL) / _Z
        gap_eV, sd_eV = squared_moments(root, sd)
        return gap_eV, np.maximum(low, 0.0) ** 2, np.maximum(high, 0.0) ** 2, sd_eV

    def _known(self, compound: Compound) -> tuple[Any, ...] | None:
        """Return the answer of the record or of the alloy rules, if either knows."""
        record = self.records_.get(compound.formula)
        if record is not None:
            half = _Z * record.sd_eV
            ends = (record.gap_eV - half, record.gap_eV + half)
            return (record.gap_eV, *ends, record.sd_eV, "on record", "record")
        mixed = alloy_gap(compound)
        if mixed is None:
            return None
        gap_eV, sd_eV, _ = mixed
        return (gap_eV, gap_eV - _Z * sd_eV, gap_eV + _Z * sd_eV, sd_eV, "new", "alloy")

    def _modelled(self, compounds: Sequence[Compound]) -> list[tuple[Any, ...]]:
        if not compounds:
            return []
        for compound in compounds:
            _require_balance(compound)
        columns = self.predict_new([compound.formula for compound in compounds])
        return [
            (*(float(value) for value in row), "new", "model") for row in zip(*columns, strict=True)
        ]
