"""Formats of line lists, and which file of a list in ExoMol format is what."""

from __future__ import annotations

FORMATS = ("hitran", "hapi", "exomol", "catalogue")

NAMELESS = ("exomol", "catalogue")
"""Formats whose lines do not say which isotopologue they are of: the recipe has to."""

EXOMOL_ENDINGS = (".def", ".def.json", ".states", ".trans", ".pf", ".broad")
"""Endings of the files of a list in ExoMol format, each plain or with .gz or .bz2 behind it."""

COMPRESSIONS = (".gz", ".bz2")


def plain_name(name: str) -> str:
    """A file's name without the ending of a compression, whatever its case."""
    for ending in COMPRESSIONS:
        if name.lower().endswith(ending) and len(name) > len(ending):
            return name[: -len(ending)]
    return name


def exomol_kind(name: str) -> str | None:
    """What a file of a list in ExoMol format holds: def, states, trans, pf or broad; None for any other file."""
    plain = plain_name(name).lower()
    for ending in EXOMOL_ENDINGS:
        if plain.endswith(ending):
            return ending.split(".")[1]
    return None
