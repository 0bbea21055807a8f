"""Content hashes: of packaged tables, of results, of what a model was learned from."""

import hashlib
import json
from collections.abc import Iterable, Mapping
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

from features.tables import packaged_path, read_package

__all__ = [
    "MODEL_FORMAT",
    "file_hash",
    "model_fingerprint",
    "package_version",
    "tables_hash",
    "text_hash",
]

MODEL_FORMAT = 2
"""Raised with every change of features, terms or training that alters predictions."""


def text_hash(text: str) -> str:
    """Return the SHA-256 of a text in hexadecimal.

    Examples
    --------
    >>> text_hash("")[:8]
    'e3b0c442'
    """
    return hashlib.sha256(text.encode("utf-8")).hexdigest()


def file_hash(path: Path) -> str:
    """Return the SHA-256 of a file's bytes in hexadecimal."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def package_version() -> str:
    """Return the installed version of the distribution."""
    try:
        return version("fewnm")
    except PackageNotFoundError:
        return "not installed"


def tables_hash(tables: Iterable[str]) -> str:
    """Return the hash of the named packaged tables and the model's format."""
    paths = {r["name"]: r["path"] for r in read_package()["resources"]}
    hashes = {name: file_hash(packaged_path("datasets", paths[name])) for name in tables}
    return text_hash(json.dumps({"format": MODEL_FORMAT, "tables": hashes}, sort_keys=True))


def model_fingerprint(tables: Iterable[str], settings: Mapping[str, Any]) -> str:
    """Return the hash of all that a trained model follows from.

    Parameters
    ----------
    tables : iterable of str
        Names of the packaged tables that train it.
    settings : mapping
        Seed and the like.

    Returns
    -------
    str
    """
    parts = {
        "tables": tables_hash(tables),
        "settings": dict(settings),
        "libraries": {name: version(name) for name in ("numpy", "scipy", "scikit-learn")},
    }
    return text_hash(json.dumps(parts, sort_keys=True))
