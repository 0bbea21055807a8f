"""What the tables hold, a specification to begin with, and the state of the environment."""

import platform
from importlib.metadata import version
from pathlib import Path

from features.errors import OutputError, TableError, explain
from features.tables import packaged_path, read_package, read_table, table_names
from screening.fingerprint import package_version
from screening.trained import cache_folder

__all__ = ["data_text", "doctor_text", "table_text", "write_start"]

_LIBRARIES = ("numpy", "scipy", "scikit-learn", "pandas", "pymatgen", "matplotlib", "joblib")


def data_text() -> str:
    """Return one line a table: name, rows, sources, rows recalled from memory, title."""
    lines = [f"{'table':<24}{'rows':>6}{'sources':>9}{'recalled':>10}  title"]
    for resource in read_package()["resources"]:
        table = read_table(resource["name"])
        sources = str(table["source"].nunique()) if "source" in table else "-"
        recalled = str(int(table["from_memory"].sum())) if "from_memory" in table else "-"
        lines.append(
            f"{resource['name']:<24}{len(table):>6}{sources:>9}{recalled:>10}  {resource['title']}"
        )
    lines.append("Print a table with: fewnm data NAME; `sources` holds the citations.")
    return "\n".join(lines) + "\n"


def table_text(name: str) -> str:
    """Return a packaged table as CSV.

    Raises
    ------
    TableError
        If there is no such table.
    """
    paths = {resource["name"]: resource["path"] for resource in read_package()["resources"]}
    if name not in paths:
        raise TableError(
            explain(f"no table {name!r}", expected=f"one of {', '.join(table_names())}")
        )
    return packaged_path("datasets", paths[name]).read_text(encoding="utf-8")


def write_start(path: Path) -> None:
    """Copy the commented starting specification.

    Raises
    ------
    OutputError
        If the file exists or cannot be written.
    """
    text = packaged_path("configs", "start.toml").read_text(encoding="utf-8")
    try:
        with path.open("x", encoding="utf-8") as stream:
            stream.write(text)
    except FileExistsError:
        raise OutputError(
            explain("the file exists", where=str(path), do="name another file")
        ) from None
    except OSError as error:
        raise OutputError(
            explain("cannot write", where=str(path), found=error.strerror or "")
        ) from None


def doctor_text() -> str:
    """Return versions, number of tables and the cache folder's state, one a line."""
    folder = cache_folder()
    kept = len(list(folder.glob("*.json"))) if folder.is_dir() else 0
    lines = [f"fewnm {package_version()}", f"Python {platform.python_version()}"]
    lines += [f"{name} {version(name)}" for name in _LIBRARIES]
    lines.append(f"tables: {len(table_names())} read, each described in datapackage.json")
    lines.append(f"kept models: {kept} (folder set by FEWNM_CACHE or the user's cache folder)")
    return "\n".join(lines) + "\n"
