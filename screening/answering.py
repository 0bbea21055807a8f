"""Which question a call asks, and its answer in the form wanted."""

from pathlib import Path

import pandas as pd

from features.errors import TableError, explain
from screening.outputs import csv_text, json_text
from screening.user_tables import read_header

__all__ = ["LARGEST_nm", "answer_one", "answer_table", "render"]

LARGEST_nm = 200.0


def answer_one(material: str, diameter_nm: float | None, size_spread: float) -> pd.DataFrame:
    """Answer one material: its bulk gap, or with a diameter the particle's.

    Parameters
    ----------
    material : str
        Formula.
    diameter_nm : float or None
        Core diameter, nm.
    size_spread : float
        Standard deviation of the diameter over its mean.

    Returns
    -------
    pandas.DataFrame
        One row.
    """
    if diameter_nm is None:
        return _bulk_gaps(pd.DataFrame({"material": [material]}))
    return _dots(pd.DataFrame({"material": [material], "diameter_nm": [diameter_nm]}), size_spread)


def answer_table(path: Path, size_spread: float) -> pd.DataFrame:
    """Answer every row of a table, in the order given.

    Parameters
    ----------
    path : pathlib.Path
        CSV whose columns say what is asked.
    size_spread : float

    Returns
    -------
    pandas.DataFrame

    Raises
    ------
    TableError
        If the table asks nothing known, or rows are faulty (all at once).
    """
    header = read_header(path)
    if "diameter_nm" in header and "adsorbate" not in header:
        from screening.predicting import read_pairs  # noqa: PLC0415 - loads the model's libraries

        return _dots(read_pairs(path), size_spread)
    if "adsorbate" in header:
        from screening.surface_answers import answer_surfaces  # noqa: PLC0415 - as above

        return answer_surfaces(path)
    if "material" in header:
        from screening.bulk_answers import read_materials  # noqa: PLC0415 - as above

        return _bulk_gaps(read_materials(path))
    raise TableError(
        explain(
            "the table asks nothing known",
            where=f"{path.name}, row 1",
            expected="material, diameter_nm; or material; or material, adsorbate",
            found=", ".join(header)[:80],
        )
    )


def _dots(pairs: pd.DataFrame, size_spread: float) -> pd.DataFrame:
    from screening.candidates import pair_frame  # noqa: PLC0415 - loads slowly
    from screening.predicting import predict_pairs  # noqa: PLC0415 - as above
    from screening.trained import trained_dots  # noqa: PLC0415 - as above

    # A material that nothing is known about is said before a model is trained for it.
    frame = pair_frame(pairs)
    return predict_pairs(frame, trained_dots(), size_spread)


def _bulk_gaps(materials: pd.DataFrame) -> pd.DataFrame:
    from screening.bulk_answers import answer_bulk_gaps  # noqa: PLC0415 - as above

    return answer_bulk_gaps(materials)


def render(answer: pd.DataFrame, form: str) -> str:
    """Return an answer as JSON, CSV or readable text, ending in a line feed."""
    if form == "json":
        return json_text(answer, "answer") + "\n"
    if form == "csv":
        return csv_text(answer)
    blocks = []
    for row in answer.to_dict("records"):
        width = max(len(str(name)) for name in row)
        lines = [
            f"{name:<{width}}  {value:.4g}"
            if isinstance(value, float)
            else f"{name:<{width}}  {value}"
            for name, value in row.items()
        ]
        blocks.append("\n".join(lines))
    return "\n\n".join(blocks) + "\n"
