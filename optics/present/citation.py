"""A primary source in the few words that fit into a table."""

from __future__ import annotations

import re

_YEAR = re.compile(r"\((\d{4})\)")
# Initials of the first author, and the surname up to the next author or the title.
_FIRST_AUTHOR = re.compile(r"^(?:[A-Z]\.[- ]?)+\s*(?P<name>[^,.]+?)(?P<more>,| and |\.)")
# A title ends in a small word or number, while the words of an abbreviated journal are capital.
_TITLE_END = re.compile(r"(?:^|[\s-])[a-z0-9][^\s.]*[.,] (?=[A-Z])")
_LONGEST = 72


def short_source(source: str) -> str:
    """Shorten a full reference to first author, journal and year.

    Parameters
    ----------
    source : str
        ``A. One, B. Two. A title. A Journal 1, 2-3 (1999) (remarks)``, the first of several
        after ``1)``; any other text is cut at a word.

    Returns
    -------
    str
        ``One et al., A Journal 1, 2-3 (1999)``; nothing is added that the source does not say.
    """
    text = " ".join(source.split()).removeprefix("1) ")
    year, author = _YEAR.search(text), _FIRST_AUTHOR.match(text)
    if year is None or author is None:
        return _cut(text)
    name = author["name"] + ("" if author["more"] == "." else " et al.")
    before = text[author.end() : year.start()].strip()
    ends = list(_TITLE_END.finditer(before))
    if not ends:
        return _cut(f"{name} ({year[1]})")
    return _cut(f"{name}, {before[ends[-1].end() :].rstrip(', ')} ({year[1]})")


def _cut(text: str) -> str:
    if len(text) <= _LONGEST:
        return text
    return text[: _LONGEST - 4].rsplit(" ", 1)[0] + " ..."
