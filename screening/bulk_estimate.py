"""Bulk constants of any compound: on record, interpolated between end members, or estimated.

An estimate starts from a trend with the gap (two-band electron mass, refractive index of Herve and
Vandamme) and adds what a Gaussian process and boosted trees learned about the logarithm of the
ratio to it from the compounds on record. Computed dielectric constants help where the compound's
gap is on record; they enter with their own offset and noise, since semilocal functionals
overestimate for narrow gaps. Uncertainties are calibrated on left-out chemical systems.
"""

from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any, Self

import numpy as np
import pandas as pd
from scipy.special import ndtri

from features.alloys import alloy_row
from features.charge import charge_balance
from features.composition import composition_descriptors
from features.elements import element_table
from features.errors import UnknownMaterialError
from features.formula import Compound, parse_formula
from features.semiconductors import bulk_constants, find_material, known_materials
from features.solid_solutions import is_solid_solution
from features.tables import read_table
from features.trends import electron_mass_from_gap, optical_dielectric_from_gap
from screening.blending import BlendedRegressor
from screening.calibration import GroupCalibration
from screening.covariance import CovarianceTerm, FloatArray

__all__ = [
    "QUANTITIES",
    "BulkConstantsModel",
    "compound_family",
    "estimate_bulk",
    "training_rows",
]

QUANTITIES = ("electron_mass_m0", "hole_mass_m0", "dielectric")
"""Constants that are estimated, beside the gap."""

_NARROWEST_EV = 0.05
_LEVEL = 0.9
# Relative standard deviation of a constant on record, by how sure the copied figure is.
_RECORD_LOG_SD = {"high": 0.05, "medium": 0.1, "low": 0.25}
_COMPUTED_NOISE = 0.15
_COLUMNS = (
    "all_mean_electronegativity",
    "all_range_electronegativity",
    "cation_mean_electronegativity",
    "anion_mean_electronegativity",
    "anion_mean_p_level_eV",
    "cation_mean_s_level_eV",
    "all_mean_row",
    "all_mean_valence_electrons",
    "all_mean_molar_volume_cm3",
    "cation_mean_group",
)
_N_COLUMNS = len(_COLUMNS) + 1
_TERMS = (
    CovarianceTerm("level", amplitude=0.5),
    CovarianceTerm(
        "composition and gap",
        tuple(range(_N_COLUMNS)),
        smoothness="matern 5/2",
        shared_length=True,
        amplitude=0.5,
        length_scale=5.0,
    ),
    CovarianceTerm("kind of source", labels=(_N_COLUMNS,), amplitude=0.15),
)
_TREES = {"max_iter": 100, "max_leaf_nodes": 6, "min_samples_leaf": 4, "max_features": 0.5}


def _gap_trend(quantity: str, gap_eV: FloatArray) -> FloatArray:
    """Return the logarithm of the trend that a quantity follows with the gap."""
    wide = np.maximum(gap_eV, _NARROWEST_EV)
    if quantity == "electron_mass_m0":
        return np.log(electron_mass_from_gap(wide))
    if quantity == "dielectric":
        return np.log(optical_dielectric_from_gap(wide))
    return np.zeros(len(wide))


def _columns(materials: Sequence[str], gap_eV: FloatArray) -> FloatArray:
    composition = composition_descriptors(list(materials))[list(_COLUMNS)].to_numpy()
    return np.column_stack([composition, np.log(np.maximum(gap_eV, _NARROWEST_EV))])


def _recorded_rows(quantity: str) -> pd.DataFrame:
    names = {"hole_mass_m0": "heavy_hole_mass_m0", "dielectric": "dielectric_optical"}
    table = read_table("bulk_semiconductors")
    rows = pd.DataFrame(
        {
            "material": table["material"],
            "gap_eV": table["gap_eV"],
            "value": table[names.get(quantity, quantity)],
            "noise": table["confidence"].map(_RECORD_LOG_SD),
            "kind": 0.0,
        }
    )
    return rows[rows["value"].notna() & (rows["gap_eV"] > _NARROWEST_EV)]


def _computed_rows() -> pd.DataFrame:
    """Return computed dielectric constants of compounds whose gap is on record."""
    gaps = read_table("bulk_gaps")
    gaps["material"] = [parse_formula(text).formula for text in gaps["formula"]]
    by_material = gaps.groupby("material")["gap_eV"].median()
    table = read_table("dielectric_computed")
    table = table[table["material"].isin(by_material.index)]
    return pd.DataFrame(
        {
            "material": table["material"],
            "gap_eV": table["material"].map(by_material),
            "value": table["dielectric_optical"],
            "noise": _COMPUTED_NOISE,
            "kind": 1.0,
        }
    )


def training_rows(quantity: str) -> pd.DataFrame:
    """Return the rows that a quantity is learned from.

    Parameters
    ----------
    quantity : str
        One of `QUANTITIES`.

    Returns
    -------
    pandas.DataFrame
        Columns material, gap_eV, value, noise (relative standard deviation), kind (0 on record,
        1 computed) and system (chemical system).
    """
    rows = _recorded_rows(quantity)
    if quantity == "dielectric":
        rows = pd.concat([rows, _computed_rows()])
    rows["system"] = [parse_formula(material).chemical_system for material in rows["material"]]
    return rows.reset_index(drop=True)


@dataclass(frozen=True)
class _Part:
    """What is learned about one quantity."""

    regressor: BlendedRegressor
    calibration: GroupCalibration
    left_out: pd.DataFrame


class BulkConstantsModel:
    """Estimates masses and dielectric constants from composition and gap.

    Parameters
    ----------
    seed : int, default 0
        Seed of the trees.
    n_folds : int, default 10
        Folds of chemical systems for the trees' left-out predictions.

    Attributes
    ----------
    left_out_ : dict of str to pandas.DataFrame
        By quantity: material, value, predicted (from the rows of other chemical systems) and
        log_error.
    """

    def __init__(self, seed: int = 0, n_folds: int = 10) -> None:
        self.seed = seed
        self.n_folds = n_folds

    def fit(self, leave_out: Collection[str] = ()) -> Self:
        """Fit and calibrate on the packaged tables.

        Parameters
        ----------
        leave_out : collection of str, default ()
            Chemical systems, such as ``"Cd-Se"``, whose rows are not used at all.

        Returns
        -------
        self
        """
        left = set(leave_out)
        self._parts = {quantity: self._fit_part(quantity, left) for quantity in QUANTITIES}
        self.left_out_ = {quantity: part.left_out for quantity, part in self._parts.items()}
        return self

    def _fit_part(self, quantity: str, leave_out: set[str]) -> _Part:
        rows = training_rows(quantity)
        rows = rows[~rows["system"].isin(leave_out)].reset_index(drop=True)
        gap = rows["gap_eV"].to_numpy(dtype=np.float64)
        X = self._scaled(_columns(rows["material"].tolist(), gap), rows["kind"].to_numpy())
        trend = _gap_trend(quantity, gap)
        target = np.log(rows["value"].to_numpy(dtype=np.float64)) - trend
        noise = rows["noise"].to_numpy(dtype=np.float64)
        regressor = BlendedRegressor(
            terms=_TERMS,
            tree_columns=range(_N_COLUMNS + 1),
            noise=0.2,
            n_folds=self.n_folds,
            tree_options=_TREES,
            seed=self.seed,
        ).fit(X, target, noise_sd=noise, max_iter=30)
        systems = rows["system"].to_numpy()
        left = regressor.left_out(systems)
        recorded = rows["kind"].to_numpy() == 0.0
        regressor.gaussian_weight = regressor.weigh_rows(target, left, systems, recorded + 1e-9)
        mean, sd = left.blend(regressor.gaussian_weight)
        total = np.sqrt(sd**2 + regressor.gaussian_.noise_**2 + noise**2)
        calibration = GroupCalibration(state=f"estimated {quantity}").fit(
            (target - mean)[recorded], total[recorded], systems[recorded]
        )
        held = rows.loc[recorded, ["material", "value"]].assign(
            predicted=np.exp(mean + trend)[recorded], log_error=(mean - target)[recorded]
        )
        return _Part(regressor, calibration, held.reset_index(drop=True))

    @staticmethod
    def _scaled(columns: FloatArray, kind: Any) -> FloatArray:
        """Bring the columns to comparable ranges by those of the elements and add the source."""
        centre, width = _scale()
        return np.column_stack([(columns - centre) / width, np.asarray(kind, dtype=np.float64)])

    def predict(self, materials: Sequence[str], gap_eV: Any) -> pd.DataFrame:
        """Estimate the constants of compounds whose gap is known or predicted.

        Parameters
        ----------
        materials : sequence of str
        gap_eV : array-like of shape (n_materials,)
            Bulk gaps; gaps below 0.05 eV count as 0.05 eV.

        Returns
        -------
        pandas.DataFrame
            For each quantity its value and ``<quantity>_log_sd``, the standard deviation of its
            logarithm, scaled so that 1.645 of it make the calibrated 90 % interval.
        """
        gap = np.asarray(gap_eV, dtype=np.float64)
        X = self._scaled(_columns(materials, gap), np.zeros(len(gap)))
        columns: dict[str, FloatArray] = {}
        for quantity, part in self._parts.items():
            mean, sd = part.regressor.predict(X, return_std=True)
            total = np.hypot(sd, part.regressor.gaussian_.noise_)
            factor = part.calibration.factor(_LEVEL) / float(ndtri(0.5 + _LEVEL / 2.0))
            columns[quantity] = np.exp(mean + _gap_trend(quantity, gap))
            columns[f"{quantity}_log_sd"] = total * factor
        return pd.DataFrame(columns)


@cache
def _scale() -> tuple[FloatArray, FloatArray]:
    """Return centre and width of the columns over the compounds of the bulk table."""
    table = read_table("bulk_semiconductors")
    gap = table["gap_eV"].to_numpy(dtype=np.float64)
    columns = _columns(table["material"].tolist(), gap)
    return columns.mean(axis=0), columns.std(axis=0)


@cache
def _trained() -> BulkConstantsModel:
    return BulkConstantsModel().fit()


@cache
def _families() -> dict[tuple[tuple[int, float], ...], str]:
    table = read_table("bulk_semiconductors")
    pairs = zip(table["material"], table["family"], strict=True)
    return {_kind(parse_formula(material)): family for material, family in pairs}


def _kind(compound: Compound) -> tuple[tuple[int, float], ...]:
    """Return the periodic-table columns with the charge there; oxygen counts as its own."""
    states = charge_balance(compound).states
    group = element_table()["group"]
    return tuple(sorted({(0 if s == "O" else int(group[s]), round(q)) for s, q in states.items()}))


def compound_family(compound: Compound) -> str:
    """Return the family of the bulk table that a compound belongs to by its columns.

    Parameters
    ----------
    compound : Compound

    Returns
    -------
    str
        ``"unlisted"`` where no compound of the same columns is on record.

    Examples
    --------
    >>> compound_family(parse_formula("CdSe0.5Te0.5")), compound_family(parse_formula("LaF3"))
    ('II-VI', 'unlisted')
    """
    return _families().get(_kind(compound), "unlisted")


@cache
def _records() -> dict[str, dict[str, Any]]:
    """Return the constants of every material on record with their spreads."""
    names = known_materials()
    table = bulk_constants(names)
    confidence = read_table("bulk_semiconductors").set_index("material")["confidence"].to_dict()
    for quantity in QUANTITIES:
        taken = table["filled"].str.split(", ").map(lambda parts, q=quantity: q in parts)
        spread = [_RECORD_LOG_SD[str(confidence[name])] for name in table["material"]]
        table[f"{quantity}_log_sd"] = np.where(taken, 0.4, spread)
    rows = table.assign(basis="record").to_dict("records")
    return {str(row["material"]): {str(k): v for k, v in row.items()} for row in rows}


def _from_record(material: str) -> dict[str, Any] | None:
    name = find_material(material)
    return None if name is None else dict(_records()[name])


def _from_alloy(material: str) -> dict[str, Any] | None:
    if not is_solid_solution(parse_formula(material)):
        return None
    try:
        row = alloy_row(material)
    except UnknownMaterialError:
        return None
    for quantity in QUANTITIES:
        scatter = row[f"{quantity}_sd"] / row[quantity]
        row[f"{quantity}_log_sd"] = float(np.hypot(scatter, _RECORD_LOG_SD["medium"]))
    return row | {"basis": "alloy", "filled": "", "source": row["gap_rule"]}


_OUTPUT = [
    "material",
    "structure",
    "family",
    "gap_eV",
    "gap_sd_eV",
    *(name for q in QUANTITIES for name in (q, f"{q}_log_sd")),
    "lattice_a_nm",
    "filled",
    "source",
    "basis",
]


def estimate_bulk(
    materials: Sequence[str], predict_gaps: Callable[[Sequence[str]], pd.DataFrame]
) -> pd.DataFrame:
    """Return bulk constants with uncertainties for any compounds, in the order given.

    Parameters
    ----------
    materials : sequence of str
    predict_gaps : callable
        Takes formulas, returns a frame with ``bulk_gap_eV`` and ``bulk_gap_sd_eV``, as
        ``BulkGapModel.predict`` does; asked only for compounds that are neither on record nor
        solid solutions of such.

    Returns
    -------
    pandas.DataFrame
        Columns of `features.semiconductors.bulk_constants`, ``<quantity>_log_sd`` of the masses
        and the dielectric constant, and ``basis``: *record*, *alloy* or *model*.

    Raises
    ------
    FormulaError
        If a text is not a formula.
    """
    rows = [_from_record(text) or _from_alloy(text) for text in materials]
    asked = [text for text, row in zip(materials, rows, strict=True) if row is None]
    estimates = iter(_from_model(asked, predict_gaps).to_dict("records") if asked else [])
    filled = [row if row is not None else dict(next(estimates)) for row in rows]
    frame = pd.DataFrame(filled)[_OUTPUT] if filled else pd.DataFrame(columns=_OUTPUT)
    frame["material"] = list(materials)
    return frame


def _from_model(
    materials: list[str], predict_gaps: Callable[[Sequence[str]], pd.DataFrame]
) -> pd.DataFrame:
    gaps = predict_gaps(materials)
    gap_eV = gaps["bulk_gap_eV"].to_numpy(dtype=np.float64)
    frame = _trained().predict(materials, gap_eV)
    frame["material"] = materials
    frame["structure"] = "unknown"
    frame["family"] = [compound_family(parse_formula(text)) for text in materials]
    frame["gap_eV"] = gap_eV
    frame["gap_sd_eV"] = gaps["bulk_gap_sd_eV"].to_numpy(dtype=np.float64)
    frame["lattice_a_nm"] = float(read_table("bulk_semiconductors")["lattice_a_nm"].median())
    frame["filled"] = "all estimated"
    frame["source"] = "estimate from composition"
    frame["basis"] = "model"
    return frame
