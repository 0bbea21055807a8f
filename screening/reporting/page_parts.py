"""What every page needs: hashes for its content-security policy, cells cut to size."""

import base64
import hashlib
import unicodedata

__all__ = ["content_hash", "short"]

_LONGEST_CELL = 600


def content_hash(text: str) -> str:
    """Return the source expression that allows one inline style or script.

    Examples
    --------
    >>> content_hash("")[:15]
    'sha256-47DEQpj8'
    """
    digest = hashlib.sha256(text.encode("utf-8")).digest()
    return f"sha256-{base64.b64encode(digest).decode('ascii')}"


def short(text: object) -> str:
    """Cut a cell and drop characters that only steer the direction or join of others.

    Examples
    --------
    >>> len(short("x" * 1000))
    601
    """
    cell = "".join(mark for mark in str(text) if unicodedata.category(mark) != "Cf")
    return cell if len(cell) <= _LONGEST_CELL else f"{cell[:_LONGEST_CELL]}…"
