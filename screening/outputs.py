"""Files of a run: written under one folder, to a temporary name first, with a manifest.

Tables come as CSV (units in the header), Parquet (units in the field metadata) and JSON (with a
schema version and no NaN). Text that a spreadsheet would run as a formula is made inert.
"""

import json
import os
import platform
import tempfile
from collections.abc import Mapping
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from features.errors import OutputError, explain
from screening.fingerprint import file_hash, package_version

__all__ = [
    "SCHEMA_VERSION",
    "UNFINISHED",
    "build_manifest",
    "csv_text",
    "json_text",
    "prepare_folder",
    "write_atomically",
    "write_parquet",
]

SCHEMA_VERSION = 1
_UNITS = ("_eV_per_nm", "_umol_per_g", "_umol_per_m2", "_eV", "_meV", "_nm", "_K")
_RISKY = ("=", "+", "-", "@", "\t", "\r")
_PROOF = "manifest.json"
UNFINISHED = ".unfinished"
"""Folder inside the output folder that holds the finished blocks of a run under way."""


def prepare_folder(folder: Path, *, overwrite: bool) -> Path:
    """Make the output folder, or refuse it.

    Parameters
    ----------
    folder : pathlib.Path
    overwrite : bool
        Whether a folder with an earlier run may be used.

    Returns
    -------
    pathlib.Path

    Raises
    ------
    OutputError
        If it cannot be made, is not a folder, or holds files and overwriting was not asked for.
    """
    try:
        if folder.exists() and not folder.is_dir():
            raise OutputError(explain("the output is not a folder", where=str(folder)))
        if folder.is_dir() and any(entry.name != UNFINISHED for entry in folder.iterdir()):
            _check_overwrite(folder, overwrite=overwrite)
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        if isinstance(error, OutputError):
            raise
        raise OutputError(
            explain("cannot use the output folder", where=str(folder), found=error.strerror or "")
        ) from None
    return folder


def _check_overwrite(folder: Path, *, overwrite: bool) -> None:
    if not overwrite:
        raise OutputError(
            explain(
                "the output folder is not empty",
                where=str(folder),
                do="choose another folder, or add --overwrite to replace an earlier run",
            )
        )
    if not (folder / _PROOF).is_file():
        raise OutputError(
            explain(
                "the output folder holds files that no run wrote",
                where=str(folder),
                do="choose another folder",
            )
        )


def write_atomically(path: Path, data: str | bytes) -> None:
    """Write a whole file or nothing: to a temporary name beside it, then rename.

    Raises
    ------
    OSError
        If the folder cannot take the file; nothing is left behind.
    """
    raw = data.encode("utf-8") if isinstance(data, str) else data
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    temporary = Path(name)
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(raw)
            stream.flush()
            os.fsync(stream.fileno())
        temporary.chmod(0o644)
        temporary.replace(path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise


def _inert(value: Any) -> Any:
    """Put an apostrophe before text that a spreadsheet would take for a formula."""
    return f"'{value}" if isinstance(value, str) and value.startswith(_RISKY) else value


def csv_text(frame: pd.DataFrame) -> str:
    r"""Return a frame as CSV with lines ending in a line feed.

    Examples
    --------
    >>> csv_text(pd.DataFrame({"material": ["=cmd()"]}))
    "material\n'=cmd()\n"
    """
    text = frame.copy()
    for name in text.columns[[not pd.api.types.is_numeric_dtype(t) for t in text.dtypes]]:
        text[name] = text[name].map(_inert)
    return str(text.to_csv(index=False, lineterminator="\n", float_format="%.6g"))


def json_text(frame: pd.DataFrame, kind: str) -> str:
    r"""Return a frame as JSON rows under a schema version; missing values become null.

    Examples
    --------
    >>> print(json_text(pd.DataFrame({"gap_eV": [1.5]}), "answer").replace("\n", ""))
    {  "schema_version": 1,  "kind": "answer",  "rows": [    {      "gap_eV": 1.5    }  ]}
    """
    rows = [
        {name: _plain(value) for name, value in row.items()} for row in frame.to_dict("records")
    ]
    content = {"schema_version": SCHEMA_VERSION, "kind": kind, "rows": rows}
    return json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False)


def _plain(value: Any) -> Any:
    if value is None or value is pd.NA or (isinstance(value, float) and not np.isfinite(value)):
        return None
    if isinstance(value, np.generic):
        return _plain(value.item())
    return float(f"{value:.9g}") if isinstance(value, float) else value


def write_parquet(path: Path, frame: pd.DataFrame) -> None:
    """Write a frame as Parquet, units in the metadata of the fields."""
    import pyarrow as pa  # noqa: PLC0415 - heavy, needed only when files are written
    import pyarrow.parquet as pq  # noqa: PLC0415 - as above

    table = pa.Table.from_pandas(frame, preserve_index=False)
    fields = [
        field.with_metadata({"unit": unit}) if (unit := _unit(field.name)) else field
        for field in table.schema
    ]
    sink = pa.BufferOutputStream()
    pq.write_table(table.cast(pa.schema(fields)), sink)
    write_atomically(path, sink.getvalue().to_pybytes())


def _unit(name: str) -> str:
    for ending in _UNITS:
        if name.endswith(ending):
            return ending[1:].replace("_per_", "/")
    return ""


def build_manifest(
    *,
    specification: Mapping[str, Any],
    model_hash: str,
    folder: Path,
    files: list[str],
    result_hash: str,
    warnings: list[str],
) -> dict[str, Any]:
    """Return the manifest of a run: what went in, what came out, with which versions.

    Holds no user or host names and no paths outside the run's folder.
    """
    libraries = ("numpy", "scipy", "scikit-learn", "pandas", "pymatgen", "matplotlib")
    return {
        "schema_version": SCHEMA_VERSION,
        "program": {"name": "fewnm", "version": package_version()},
        "python": platform.python_version(),
        "libraries": {name: version(name) for name in libraries},
        "specification": dict(specification),
        "model_hash": model_hash,
        "result_hash": result_hash,
        "files": {name: file_hash(folder / name) for name in files},
        "data_licence": "CC-BY-4.0 (tables), sources cited in the report",
        "warnings": warnings,
    }
