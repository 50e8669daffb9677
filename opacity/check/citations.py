"""References as BibTeX: what a reference's text says, taken apart where its form allows, and nothing else."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from opacity.errors import printable

_NAME = r"[^\W\d_](?:[^\W\d_]|['\u2019.-])*(?: (?:[^\W\d_]|['\u2019.-])+)*"
_ARTICLE = re.compile(
    rf"(?P<authors>{_NAME}(?:, {_NAME})*(?: ?& {_NAME}| and {_NAME})?(?: et al\.?)?) "
    r"\(?(?P<year>(?:19|20)\d\d)\)?, "
    r"(?P<journal>[^\W\d_][^\d,;:()]*?) (?P<volume>[A-Z]?\d+), (?P<page>[A-Z]?\d+(?:[-\u2013]\d+)?)(?P<rest>.*)"
)
"""Authors YEAR, Journal VOLUME, PAGE, and what follows."""
_DOI = re.compile(r"(?:doi:|https://doi\.org/)\s*(10\.\d{4,9}/[^\s,;()\"{}\\]+)", re.IGNORECASE)
_SPECIAL = {
    "\\": r"\textbackslash{}",
    "~": r"\textasciitilde{}",
    "^": r"\textasciicircum{}",
    **{one: "\\" + one for one in "&%$#_{}"},
}


@dataclass(frozen=True)
class Citation:
    """A reference's own text, and its entry in BibTeX."""

    text: str
    bibtex: str


def citations(references: Sequence[str]) -> tuple[Citation, ...]:
    """An entry for each reference, with keys that differ.

    What has the form of authors, year, journal, volume and page becomes an article; anything else, what says of itself
    that it is from memory, and what names several works, a @misc with the text as its note.
    """
    keys: set[str] = set()
    found = []
    for number, text in enumerate(references, start=1):
        text = " ".join(printable(str(text).replace("\n", " ")).split())
        kind, fields = _entry(text)
        key = _key(fields, number)
        while key in keys:
            key += "x"
        keys.add(key)
        body = "".join(f"  {name} = {{{value}}},\n" for name, value in fields.items())
        found.append(Citation(text, f"@{kind}{{{key},\n{body}}}"))
    return tuple(found)


def _entry(text: str) -> tuple[str, dict[str, str]]:
    """The kind of entry and its fields."""
    dois = _DOI.findall(text)
    doi = {"doi": dois[0].rstrip(".")} if len(dois) == 1 else {}
    match = _ARTICLE.fullmatch(text)
    several = len(dois) > 1 or (match is not None and re.search(r"\b(19|20)\d\d, \w", match["rest"]))
    if match is None or several or "from memory" in text.lower():
        return "misc", {"note": _tex(text), **({} if several else doi)}
    rest = _DOI.sub("", match["rest"]).strip(" ,;.")
    return "article", {
        "author": _authors(match["authors"]),
        "year": match["year"],
        "journal": _tex(match["journal"].strip()),
        "volume": match["volume"],
        "pages": match["page"].replace("\u2013", "-").replace("-", "--"),
        **doi,
        **({"note": _tex(rest)} if rest else {}),
    }


def _authors(text: str) -> str:
    """Names joined as BibTeX wants them; braces keep a family name of several words whole."""
    others = re.search(r" et al\.?$", text)
    names = re.split(r", | ?& | and ", text[: others.start()] if others else text)
    joined = [f"{{{_tex(name)}}}" if " " in name else _tex(name) for name in names]
    return " and ".join([*joined, *(["others"] if others else [])])


def _tex(text: str) -> str:
    return "".join(_SPECIAL.get(one, one) for one in text)


def _key(fields: dict[str, str], number: int) -> str:
    if "author" not in fields:
        return f"reference{number}"
    first = re.sub(r"[^A-Za-z]", "", fields["author"].split(" and ")[0])
    return f"{first or 'reference'}{fields['year']}"
