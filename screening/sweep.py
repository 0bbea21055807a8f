"""Sweeps: composition spaces of any size searched block by block for the best candidates.

Compositions are made one at a time and searched in blocks (`screening.sweep_block`). The chance of
the last place on the list rises as the search goes on and everything below it is dropped, so memory
stays flat. What is dropped could not be listed: the shortlist is that of the exhaustive run, for
any number of workers. Workers come from joblib's configuration; finished blocks can be kept on disk
and are taken up again by the same run.
"""

import io
import json
from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import islice
from pathlib import Path
from typing import TYPE_CHECKING, Any
from zipfile import BadZipFile

import numpy as np
import pandas as pd
from joblib import Parallel, delayed

from features.formula import Compound, parse_formula
from features.semiconductors import recorded_name
from features.solid_solutions import element_column, is_solid_solution
from screening.candidates import pair_frame, size_grid
from screening.fingerprint import text_hash
from screening.limits import judge
from screening.outputs import write_atomically
from screening.sweep_block import BlockQuestion, Found, search_block

if TYPE_CHECKING:
    from screening.dots import SizeGapModel
    from screening.specification import Candidates, Specification
    from screening.tracks import Track

__all__ = ["Sweep", "SweepCounts", "count_mixtures", "enumerate_compositions"]

_BLOCK = 1024
_CHUNK = 400
_TIE = 1e-8
_UNKNOWN = "no solid solution of materials on record"


@dataclass
class SweepCounts:
    """What became of the candidates of a sweep.

    Attributes
    ----------
    compositions, pairs : int
        Compositions met, and pairs of composition and size.
    with_trees, solved, scored : int
        Pairs that the bounds left for the trees, for a solve, and for every score.
    refused : dict of str to int
        Compositions that the specification refuses, by reason.
    best : dict of str to int
        Compositions by their highest chance, exact or an upper bound, in tenths.
    """

    compositions: int = 0
    pairs: int = 0
    with_trees: int = 0
    solved: int = 0
    scored: int = 0
    refused: dict[str, int] = field(default_factory=dict)
    best: dict[str, int] = field(default_factory=dict)

    def add(self, found: Found) -> None:
        """Count a block."""
        self.compositions += len(found.best)
        self.pairs += found.n_pairs
        self.with_trees += found.n_trees
        self.solved += found.n_solved
        places = np.clip((found.best * 10.0).astype(int), 0, 9)
        for place, count in zip(*np.unique(places, return_counts=True), strict=True):
            name = f"{place / 10:.1f} to {(place + 1) / 10:.1f}"
            self.best[name] = self.best.get(name, 0) + int(count)


def count_mixtures(wanted: "Candidates") -> int:
    """Return how many mixtures the spaces of a specification hold, before any is made."""
    return sum(space.space().n_mixtures for space in wanted.spaces)


def enumerate_compositions(
    wanted: "Candidates", refused: dict[str, int] | None = None
) -> Iterator[str]:
    """Yield the compositions of all spaces that the specification allows, each once.

    Parameters
    ----------
    wanted : Candidates
    refused : dict of str to int or None, default None
        Counts by reason, raised on the way.

    Yields
    ------
    str
        Formula, named as in the tables where it is on record.
    """
    counts: dict[str, int] = {} if refused is None else refused
    seen: set[str] = set()
    excluded = set(wanted.exclude_elements)
    left_out = {parse_formula(text).formula for text in wanted.exclude_materials}
    for rule in wanted.spaces:
        space = rule.space()
        for elements in space.choices():
            if excluded & {symbol for chosen in elements for symbol in chosen}:
                _count(counts, "contains excluded elements", space.n_of(elements))
                continue
            if rule.on_record and _is_isovalent(elements):
                first = next(space.compounds(elements), None)
                if first is None or not _is_known(first, {}):
                    _count(counts, _UNKNOWN, space.n_of(elements))
                    continue
            known: dict[object, bool] = {}
            for compound in space.compounds(elements):
                name = recorded_name(compound) or compound.formula
                if name in seen:
                    continue
                if rule.on_record and not _is_known(compound, known):
                    _count(counts, _UNKNOWN)
                    continue
                seen.add(name)
                if compound.formula in left_out:
                    _count(counts, "excluded by name")
                else:
                    yield name


def _is_isovalent(elements: tuple[tuple[str, ...], ...]) -> bool:
    """Return whether the elements of every sublattice stand in one column."""
    return all(len({element_column(symbol) for symbol in chosen}) == 1 for chosen in elements)


def _count(counts: dict[str, int], reason: str, number: int = 1) -> None:
    counts[reason] = counts.get(reason, 0) + number


def _is_known(compound: Compound, known: dict[object, bool]) -> bool:
    """Return whether all end members are on record; of one choice of elements asked once a total.

    What is shared by compositions of one choice of elements are the end members; only the totals
    of the sublattices may differ, and with them the members.
    """
    key = _totals(compound)
    if key not in known:
        known[key] = recorded_name(compound) is not None or is_solid_solution(compound)
    return known[key]


def _totals(compound: Compound) -> tuple[float, ...]:
    """Return the total of each column of the periodic table, which tells the end members apart."""
    totals: dict[float, float] = {}
    for symbol, amount in compound.parts:
        column = element_column(symbol)
        totals[column] = totals.get(column, 0.0) + amount
    return tuple(round(totals[column], 6) for column in sorted(totals))


class Sweep:
    """One search.

    Parameters
    ----------
    specification : Specification
        With candidate spaces and an optical target.
    model : SizeGapModel
        Fitted and calibrated.
    track : Track
        Scores candidates in full and orders them.
    kept : pathlib.Path or None, default None
        Folder for finished blocks; None keeps nothing.
    key : str, default ""
        Hash of all that the blocks follow from.
    """

    def __init__(
        self,
        specification: "Specification",
        model: "SizeGapModel",
        track: "Track",
        kept: Path | None = None,
        key: str = "",
    ) -> None:
        self.specification, self.model, self.track = specification, model, track
        self.kept, self.key = kept, key
        target = specification.target
        self.question = BlockQuestion(
            tuple(size_grid(specification.candidates).tolist()),
            target.energies_eV,
            target.quantity == "emission",
        )
        self.counts = SweepCounts()
        self._pool = _pool([], [], [])
        self._scored: list[pd.DataFrame] = []
        self._taken_up: list[Found] = []
        self._least = 0.0
        self._listed = pd.DataFrame()

    def run(self, named: list[str]) -> list[str]:
        """Search all compositions.

        Parameters
        ----------
        named : list of str
            Materials that compete besides those of the spaces.

        Returns
        -------
        list of str
            The materials of the shortlist, sorted; empty where nothing qualifies.
        """
        for state in self.model.states_:
            # fitted here once, not in every worker again
            self.model.regressor(state)
        self._least = max(self.specification.shortlist.least_chance, 1e-12)
        parallel = Parallel(return_as="generator", pre_dispatch="3*n_jobs")
        for found in parallel(self._tasks(self._names(named))):
            self._meet(found)
        for found in self._taken_up:
            self._meet(found)
        return sorted(set(self._listed["material"])) if len(self._listed) else []

    def _meet(self, found: Found) -> None:
        self.counts.add(found)
        rows = _pool(found.material, found.diameter_nm, found.chance)
        self._pool = pd.concat([self._pool, rows], ignore_index=True)
        self._least = self._cut(self._least)

    def _tasks(self, names: Iterator[str]) -> Iterator[Any]:
        """Yield one task a block that is not on disk yet, asking what the list asks by then."""
        for number, block in enumerate(_batches(names)):
            path = self._path(number, block)
            found = _read(path)
            if found is not None:
                self._taken_up.append(found)
                continue
            yield delayed(_search)(self.model, block, self.question, self._least, path)

    def _names(self, named: list[str]) -> Iterator[str]:
        known = set(named)
        yield from named
        for name in enumerate_compositions(self.specification.candidates, self.counts.refused):
            if name not in known:
                yield name

    def _path(self, number: int, block: list[str]) -> Path | None:
        if self.kept is None:
            return None
        content = text_hash(json.dumps([self.key, block]))[:24]
        return self.kept / f"{number:07d}-{content}.npz"

    def _cut(self, least: float) -> float:
        """Score the likeliest pairs until the list is settled; return the chance that it asks."""
        length = self.specification.shortlist.length
        order = ["chance", "material", "diameter_nm"]
        self._pool = self._pool.sort_values(order, ascending=[False, True, True], kind="stable")
        last = least
        while True:
            todo = self._pool[self._pool["open"] & (self._pool["chance"] >= last)]
            if todo.empty:
                break
            chunk = todo.head(_CHUNK)
            self._scored.append(self._allowed(chunk))
            self._pool.loc[chunk.index, "open"] = False
            self._listed = self._best(pd.concat(self._scored, ignore_index=True))
            if len(self._listed) == length:
                last = max(least, float(self._listed["chance_in_window"].min()) - _TIE)
        self._pool = self._pool[self._pool["chance"] >= last].reset_index(drop=True)
        rows = pd.concat(self._scored, ignore_index=True) if self._scored else pd.DataFrame()
        self._scored = [rows[rows["chance_in_window"] >= last]] if len(rows) else []
        return last

    def _allowed(self, pairs: pd.DataFrame) -> pd.DataFrame:
        grid = pair_frame(pairs[["material", "diameter_nm"]].reset_index(drop=True))
        scored = self.track.score(self.model, grid)
        self.counts.scored += len(scored)
        return scored[judge(scored, self.specification.limits).allowed]

    def _best(self, scored: pd.DataFrame) -> pd.DataFrame:
        from screening.ranking import shortlist_of  # noqa: PLC0415 - it imports the tracks

        return shortlist_of(scored, self.specification, self.track)


def _search(
    model: "SizeGapModel",
    block: list[str],
    question: BlockQuestion,
    least: float,
    path: Path | None,
) -> Found:
    """Search a block and keep what was found."""
    found = search_block(model, block, question, least)
    if path is not None:
        _keep(path, found)
    return found


def _pool(material: Any, diameter_nm: Any, chance: Any) -> pd.DataFrame:
    """Return pairs that wait to be scored."""
    return pd.DataFrame(
        {
            "material": pd.Series(material, dtype=object),
            "diameter_nm": pd.Series(diameter_nm, dtype=np.float64),
            "chance": pd.Series(chance, dtype=np.float64),
            "open": np.ones(len(chance), dtype=bool),
        }
    )


def _batches(names: Iterator[str]) -> Iterator[list[str]]:
    while block := list(islice(names, _BLOCK)):
        yield block


def _read(path: Path | None) -> Found | None:
    """Return a kept block, or None where there is none that is whole."""
    if path is None or not path.is_file():
        return None
    try:
        with path.open("rb") as stream, np.load(stream, allow_pickle=False) as data:
            n_pairs, n_trees, n_solved = (int(value) for value in data["numbers"])
            return Found(
                material=data["material"].astype(object),
                diameter_nm=data["diameter"],
                chance=data["chance"],
                n_pairs=n_pairs,
                n_trees=n_trees,
                n_solved=n_solved,
                best=data["best"],
            )
    except (OSError, ValueError, KeyError, BadZipFile):
        return None


def _keep(path: Path, found: Found) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    data = io.BytesIO()
    arrays: dict[str, Any] = {
        "material": found.material.astype(str),
        "diameter": found.diameter_nm,
        "chance": found.chance,
        "numbers": np.array([found.n_pairs, found.n_trees, found.n_solved]),
        "best": found.best,
    }
    np.savez(data, **arrays)
    write_atomically(path, data.getvalue())
