"""How kinds of sites are told apart in pictures: fill, hatch, mark.

Fills are those of Okabe and Ito, chosen to differ in lightness as well; hatches and marks repeat
what they say, so that the pictures read in black and white.
"""

from dataclasses import dataclass

__all__ = ["SITE_STYLES", "SiteStyle", "site_kind"]


@dataclass(frozen=True)
class SiteStyle:
    """Look of one kind of site.

    Attributes
    ----------
    fill, ink : str
        Colours of the atom or area, and of what is drawn on it.
    hatch, mark : str
        Empty for none.
    words : str
    """

    fill: str
    ink: str
    hatch: str
    mark: str
    words: str


SITE_STYLES = {
    "terrace": SiteStyle("#F0E442", "black", "", "", "close-packed terrace"),
    "open terrace": SiteStyle("#56B4E9", "black", "..", "+", "terrace of an open facet"),
    "edge": SiteStyle("#D55E00", "black", "//", "_", "edge"),
    "vertex": SiteStyle("#1B1F24", "white", "xx", "x", "vertex"),
    "step": SiteStyle("#009E73", "black", "\\\\", "", "step"),
}
"""Styles by kind, in the order in which they are stacked and listed."""

_CLOSE_PACKED = {"fcc": "(111)", "hcp": "(0001)", "bcc": "(110)"}


def site_kind(structure: str, site: str, facet: str) -> str:
    """Return the kind of a site class.

    Examples
    --------
    >>> site_kind("fcc", "terrace", "(100)"), site_kind("fcc", "edge", "(111)/(111)")
    ('open terrace', 'edge')
    """
    if site == "terrace" and facet != _CLOSE_PACKED[structure]:
        return "open terrace"
    return site
