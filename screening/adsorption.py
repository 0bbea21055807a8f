"""Adsorption energies of metals and binary alloys: surfaces, and the sites of particles.

Energies in eV against one common reference per adsorbate (`features.adsorption`), as the
reference source's functional gives them; negative binds. Intervals hold 90 % of the left-out
groups of the state that `record_state` names: they come from residuals of metals, elements or
compositions that were left out, never from rows that the model saw.
"""

from collections.abc import Collection, Mapping
from typing import Any, Self

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.adsorption_descriptors import (
    alloy_parts,
    standardised_descriptors,
)
from features.errors import TableError, explain
from screening.adsorption_alloys import AlloySurfaceModel
from screening.adsorption_answers import NORMAL_90, result_frame, site_frame
from screening.adsorption_design import FAMILIES, alloy_rows, family_of
from screening.adsorption_pure import PureSurfaceModel, pure_rows
from screening.adsorption_questions import close_packed_structure, read_surfaces
from screening.adsorption_rules import HollowRule
from screening.adsorption_sites import SiteShifts
from screening.calibration import GroupCalibration
from screening.covariance import FloatArray

__all__ = ["LEVEL", "RECORD_STATES", "AdsorptionModel", "adsorption_model", "pure_models_without"]

LEVEL = 0.9
"""Central level of the intervals."""

RECORD_STATES = (
    "tabulated surface",
    "metal with other data",
    "new metal",
    "tabulated composition",
    "new composition",
    "new element",
    "mixing rule",
)
"""What stands behind a prediction."""


def pure_models_without(
    pure: PureSurfaceModel, elements: Collection[str]
) -> dict[str, PureSurfaceModel]:
    """Return models of pure metals, each without one element, covariance parameters kept."""
    rows = pure.rows_.drop(columns="reference")
    return {
        e: PureSurfaceModel().fit(rows[rows["metal"] != e], pure.gaussian_.theta_, max_iter=0)
        for e in elements
    }


class AdsorptionModel:
    """Surfaces of metals and binary alloys, and sites of particles made of them.

    Attributes
    ----------
    pure_ : PureSurfaceModel
    families_ : dict of str to AlloySurfaceModel
    rule_ : HollowRule
    sites_ : SiteShifts
    calibrations_ : dict of str to GroupCalibration
        By state, for pure metals.
    """

    def fit(self, pure: pd.DataFrame | None = None, alloys: pd.DataFrame | None = None) -> Self:
        """Fit from the packaged tables, or from rows of the same form.

        Parameters
        ----------
        pure : pandas.DataFrame or None, default None
            As from `pure_rows`.
        alloys : pandas.DataFrame or None, default None
            As from `alloy_rows`.

        Returns
        -------
        self
        """
        self.pure_ = PureSurfaceModel().fit(pure_rows() if pure is None else pure)
        self._calibrate_pure()
        self._prepare_alloys(alloy_rows() if alloys is None else alloys)
        members = sorted(set(self.alloys_["first"]) | set(self.alloys_["second"]))
        without = pure_models_without(self.pure_, members)
        self.families_ = {
            name: AlloySurfaceModel(adsorbates)
            .fit(self.alloys_, self.pure_)
            .calibrate_elements(without)
            for name, adsorbates in FAMILIES.items()
        }
        return self

    def _prepare_alloys(self, alloys: pd.DataFrame) -> None:
        self.alloys_ = _shifted(alloys, self.pure_)
        self.sites_ = SiteShifts().fit(self.pure_.rows_)
        self.rule_ = HollowRule().fit(self.alloys_, self.pure_)

    def learned(self) -> dict[str, Any]:
        """Return what the fit learned, as plain numbers for `restored`."""
        return {
            "pure": self.pure_.gaussian_.theta_.tolist(),
            "calibrations": {s: c.learned() for s, c in self.calibrations_.items()},
            "families": {name: model.learned() for name, model in self.families_.items()},
        }

    @classmethod
    def restored(cls, kept: Mapping[str, Any]) -> Self:
        """Rebuild the model of the packaged tables from what `learned` returned.

        Raises
        ------
        KeyError, TypeError, ValueError
            If the numbers are not those of such a model.
        """
        model = cls()
        theta = np.array(kept["pure"], dtype=np.float64)
        model.pure_ = PureSurfaceModel().fit(pure_rows(), theta, max_iter=0)
        model.calibrations_ = {
            str(state): GroupCalibration.restored(part, str(state))
            for state, part in kept["calibrations"].items()
        }
        model._prepare_alloys(alloy_rows())
        model.families_ = {
            name: AlloySurfaceModel(adsorbates).restore(
                model.alloys_, model.pure_, kept["families"][name]
            )
            for name, adsorbates in FAMILIES.items()
        }
        return model

    @property
    def adsorbates(self) -> list[str]:
        """Adsorbates that can be predicted."""
        return list(self.pure_.adsorbates_)

    def predict_surfaces(self, frame: pd.DataFrame) -> pd.DataFrame:
        """Predict the most stable site of extended surfaces.

        Parameters
        ----------
        frame : pandas.DataFrame
            Columns material (``Pt``, ``Pt3Ni``, ``AgAu``) and adsorbate; structure and facet are
            optional and may be empty: the close-packed face then. A shift measured between faces
            of pure metals leads to open faces.

        Returns
        -------
        pandas.DataFrame
            Index and order of `frame`; adsorption_energy_eV, adsorption_energy_low_eV,
            adsorption_energy_high_eV (90 %), adsorption_energy_sd_eV, record_state and
            nearest_source.

        Raises
        ------
        TableError
            If a column is missing, or a structure or facet is unknown.
        SpecificationError
            If an adsorbate is unknown.
        FormulaError, UnknownMaterialError
            If a material cannot be read or has an element without data.
        """
        rows = read_surfaces(frame, self.pure_.adsorbates_)
        parts = [self._pure(rows), self._alloys(rows)]
        result = pd.concat([p for p in parts if len(p)] or parts[:1]).reindex(rows.index)
        result.index = frame.index
        return result

    def predict_sites(self, material: str, adsorbate: str, sites: pd.DataFrame) -> pd.DataFrame:
        """Predict the sites of a particle by their generalised coordination.

        Parameters
        ----------
        material, adsorbate : str
        sites : pandas.DataFrame
            One row a site class with generalised_coordination (neighbours over the bulk's); other
            columns such as coordination and facet are not needed.

        Returns
        -------
        pandas.DataFrame
            Index and order of `sites`; columns as in `predict_surfaces`, and terrace_sd_eV (common
            to all sites of the material) and site_sd_eV (each site's own).

        Raises
        ------
        TableError
            If the column is missing or its values are not above 0 and at most 12.
        """
        if "generalised_coordination" not in sites:
            raise TableError(
                explain("no column 'generalised_coordination'", found=", ".join(sites.columns))
            )
        coordination = sites["generalised_coordination"].to_numpy(dtype=np.float64)
        if not np.all((coordination > 0.0) & (coordination <= 12.0)):
            raise TableError(explain("generalised coordination", expected="above 0, at most 12"))
        terrace = self.predict_surfaces(
            pd.DataFrame({"material": [material], "adsorbate": [adsorbate]})
        ).iloc[0]
        first, second, share = alloy_parts(material)
        parts = {first: 1.0} if first == second else {first: share, second: 1.0 - share}
        shift, sd = self.sites_.shift(parts, adsorbate, coordination, close_packed_structure(first))
        return site_frame(terrace, shift, sd, sites.index)

    def calibration(self, state: str, adsorbate: str) -> GroupCalibration:
        """Return the calibration behind a record state of `predict_surfaces`."""
        if state in self.calibrations_:
            return self.calibrations_[state]
        name = family_of(adsorbate)
        if name is None or state == "mixing rule":
            return self.rule_.calibration_
        family = self.families_[name]
        return family.element_calibration_ if state == "new element" else family.calibration_

    def source_offsets(self) -> pd.DataFrame:
        """Return the fitted offset of every source and adsorbate: see `PureSurfaceModel`."""
        return self.pure_.source_offsets()

    def _calibrate_pure(self) -> None:
        """Learn the intervals of the three states of pure metals from rows left out."""
        rows = self.pure_.rows_
        own = (rows["reference"] & (rows["openness"] == 0.0)).to_numpy()
        surface = rows["metal"] + " " + rows["adsorbate"]
        twice = surface.map(surface[rows["openness"] == 0.0].value_counts()).to_numpy() > 1
        single = pd.Series(np.arange(len(rows)), index=rows.index)
        states = {
            "new metal": (rows["metal"], own),
            "metal with other data": (surface, own),
            "tabulated surface": (single, own & twice),
        }
        self.calibrations_ = {
            state: self._calibration(state, groups, kept)
            for state, (groups, kept) in states.items()
        }

    def _calibration(
        self, state: str, groups: pd.Series, kept: NDArray[np.bool_]
    ) -> GroupCalibration:
        left = self.pure_.leave_out(groups.to_numpy())[kept]
        residual = left["energy_eV"] - left["predicted_eV"]
        return GroupCalibration(state=state).fit(residual, left["sd_eV"], left["metal"])

    def _pure(self, rows: pd.DataFrame) -> pd.DataFrame:
        pure = rows[rows["first"] == rows["second"]]
        if pure.empty:
            return result_frame(pure, np.empty(0), np.empty(0), np.empty(0), [], [])
        found = self.pure_.predict(
            pure["first"].tolist(), pure["adsorbate"].tolist(), pure["openness"].to_numpy()
        )
        state = [self._pure_state(row) for row in pure.itertuples()]
        factor = np.array([self.calibrations_[s].factor(LEVEL) for s in state])
        near = [self._nearest_metal(row) for row in pure.itertuples()]
        return result_frame(pure, found.mean, found.sd, factor * found.sd, state, near)

    def _pure_state(self, row: Any) -> str:
        table = self.pure_.rows_
        own = table[table["metal"] == row.first]
        if own.empty:
            return "new metal"
        same = own[own["adsorbate"] == row.adsorbate]
        exact = (same["openness"] == row.openness).any()
        return "tabulated surface" if exact else "metal with other data"

    def _nearest_metal(self, row: Any) -> str:
        table = self.pure_.rows_
        table = table[table["adsorbate"] == row.adsorbate]
        descriptors = standardised_descriptors()
        gap = descriptors.loc[table["metal"]].to_numpy() - descriptors.loc[row.first].to_numpy()
        distance = np.linalg.norm(gap, axis=1) + np.abs(table["openness"] - row.openness)
        distance += 0.01 * ~table["reference"]
        best = table.iloc[int(np.argmin(distance))]
        return f"{best['source']}: {best['metal']}({best['facet']})"

    def _alloys(self, rows: pd.DataFrame) -> pd.DataFrame:
        alloys = rows[rows["first"] != rows["second"]]
        parts = [self._family(part) for _, part in alloys.groupby("adsorbate", sort=False)]
        return pd.concat(parts) if parts else alloys[[]]

    def _family(self, rows: pd.DataFrame) -> pd.DataFrame:
        """Predict alloys of one adsorbate, state by state."""
        name = family_of(str(rows["adsorbate"].iloc[0]))
        state = np.array([self._alloy_state(name, row) for row in rows.itertuples()])
        parts = [
            self._alloy_part(name, str(s), rows[state == s]) for s in dict.fromkeys(state.tolist())
        ]
        return pd.concat(parts)

    def _alloy_state(self, name: str | None, row: Any) -> str:
        if name is None:
            return "mixing rule"
        model = self.families_[name]
        table = model.rows_
        members = set(table["first"]) | set(table["second"])
        if {row.first, row.second} <= members:
            table = table[table["adsorbate"] == row.adsorbate]
            same = (table["first"] == row.first) & (table["second"] == row.second)
            exact = same & ~table["hollow"] & np.isclose(table["share"], row.share)
            return "tabulated composition" if exact.any() else "new composition"
        enough = LEVEL in model.element_calibration_.factors_
        return "new element" if enough else "mixing rule"

    def _alloy_part(self, name: str | None, state: str, rows: pd.DataFrame) -> pd.DataFrame:
        if name is None or state == "mixing rule":
            mean, sd = self.rule_.predict(rows)
            factor = self.rule_.calibration_.factor(LEVEL)
        elif state == "new element":
            mean, sd = self.families_[name].predict_new_element(rows)
            factor = self.families_[name].element_calibration_.factor(LEVEL)
        else:
            mean, sd = self.families_[name].predict(rows)
            factor = self.families_[name].calibration_.factor(LEVEL)
        shift, shift_sd = self._open_face(rows)
        half = np.hypot(factor * sd, NORMAL_90 * shift_sd)
        near = [self._nearest_alloy(row) for row in rows.itertuples()]
        states = [state] * len(rows)
        return result_frame(rows, mean + shift, np.hypot(sd, shift_sd), half, states, near)

    def _open_face(self, rows: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
        """Return the shift of open alloy faces: the share-weighted mean over the pure metals."""
        if not rows["openness"].any():
            return np.zeros(len(rows)), np.zeros(len(rows))
        species, openness = rows["adsorbate"].tolist(), rows["openness"].to_numpy()
        share = rows["share"].to_numpy()
        shift, sd = np.zeros(len(rows)), np.zeros(len(rows))
        for metals, weight in ((rows["first"], share), (rows["second"], 1.0 - share)):
            opened = self.pure_.predict(metals.tolist(), species, openness)
            shift += weight * (opened.mean - self.pure_.predict(metals.tolist(), species).mean)
            sd += weight * opened.sd * (openness > 0.0)
        return shift, sd

    def _nearest_alloy(self, row: Any) -> str:
        table = self.alloys_[self.alloys_["adsorbate"] == row.adsorbate]
        table = self.alloys_ if table.empty else table
        metals = standardised_descriptors()
        first, second = metals.loc[row.first].to_numpy(), metals.loc[row.second].to_numpy()
        left, right = metals.loc[table["first"]].to_numpy(), metals.loc[table["second"]].to_numpy()
        share = table["share"].to_numpy()
        straight = _distance(left - first, right - second, share - row.share)
        crossed = _distance(left - second, right - first, 1.0 - share - row.share)
        best = table.iloc[int(np.argmin(np.minimum(straight, crossed)))]
        return f"{best['source']}: {best['composition']}"


def _distance(first: FloatArray, second: FloatArray, share: FloatArray) -> FloatArray:
    squared = np.sum(first**2, axis=1) + np.sum(second**2, axis=1) + 4.0 * share**2
    return np.asarray(np.sqrt(squared), dtype=np.float64)


def _shifted(alloys: pd.DataFrame, pure: PureSurfaceModel) -> pd.DataFrame:
    """Take the fitted offset of each alloy row's source off its energy."""
    offsets = pure.source_offsets().set_index(["source", "adsorbate"])["offset_eV"]
    keys = pd.MultiIndex.from_frame(alloys[["source", "adsorbate"]])
    shift = offsets.reindex(keys).fillna(0.0).to_numpy()
    return alloys.assign(energy_eV=alloys["energy_eV"] - shift)


def adsorption_model() -> AdsorptionModel:
    """Return the model of the packaged tables: see `screening.trained_surfaces`."""
    from screening.trained_surfaces import trained_surfaces  # noqa: PLC0415 - it imports this one

    return trained_surfaces()
