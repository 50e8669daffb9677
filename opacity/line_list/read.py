"""Reading one or several files of lines into one list."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import as_number, shown
from opacity.errors import InputError, LineListError, problem
from opacity.grids import FloatArray
from opacity.line_list.catalogue import catalogue_lines
from opacity.line_list.duplicates import refuse_repeated_files
from opacity.line_list.foreign import ForeignRecords
from opacity.line_list.hapi_table import hapi_parser, is_hapi
from opacity.line_list.hitran import hitran_parser
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.records import ParsedColumns, ReadOptions, judge
from opacity.line_list.text import TextChunk, read_chunks
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import Isotopologue, isotopologues_of
from opacity.recipe.formats import plain_name

Parser = Callable[[TextChunk], ParsedColumns]

_MASS = "a mass above 0 g/mol"

READERS: dict[str, Callable[[Path], Parser]] = {"hitran": hitran_parser, "hapi": hapi_parser}


def read_lines(
    files: str | Path | Sequence[str | Path],
    format: str | None = None,
    *,
    range: tuple[float, float] | None = None,
    bad_records: str = "stop",
    formula: str | None = None,
    isotopologue: str | None = None,
    mass: float | None = None,
    options: ReadOptions | None = None,
) -> LineList:
    """Read line lists into one `LineList` sorted by wavenumber.

    `format` is "hitran" (160-character records, .gz and .bz2 too), "hapi" (.data, .gz and .bz2 too,
    with its .header) or "catalogue" (JPL/CDMS .cat); if it is None the file's ending decides.
    `range` (cm-1) keeps the lines inside it, ends included.  `bad_records`
    is "stop" (a record that can't be right is an error) or "leave-out" (it is counted and left out).

    `formula` is the molecule's, and needed for a catalogue, as is `isotopologue`: "(12C)(16O)", "12C-16O", or "1" for
    HITRAN's local number; from a list of several it takes that one alone.  `mass` (g/mol) is that of a molecule which
    hapi does not know.  `options` say the same and more where a recipe does.

    Raises LineListError naming file and line, InputError for an unknown format or option.
    """
    if bad_records not in ("stop", "leave-out"):
        raise InputError(problem("bad_records", "unknown", expected='"stop" or "leave-out"', found=f'"{bad_records}"'))
    paths = [Path(files)] if isinstance(files, (str, Path)) else [Path(one) for one in files]
    if not paths:
        raise InputError(problem("files", "no line list given", expected="one or more files"))
    base = _options(options or ReadOptions(), formula, isotopologue, mass)
    if range is not None and not range[0] <= range[1]:
        raise InputError(problem("range", "not a range", expected="two wavenumbers, the lower first", found=range))
    lines = refuse_repeated_files(merge([_read_one(path, format, base, bad_records == "leave-out") for path in paths]))
    lines.ledger.refuse_nothing_kept(paths[0])
    formulas = sorted({one.molecule_formula for one in lines.isotopologues})
    if len(formulas) > 1:
        raise LineListError(
            problem(paths[0], "lines of several molecules", expected="one molecule", found=", ".join(formulas))
        )
    if base.isotopologue is not None and len(lines) and not is_catalogue(paths[0], format):
        lines = only(lines, base.isotopologue)
    if range is not None:
        lower, upper = range
        lines = lines.select((lines.wavenumber >= lower) & (lines.wavenumber <= upper), "outside the range asked for")
    return check_account(lines)


def _options(base: ReadOptions, formula: object, isotopologue: object, mass: object) -> ReadOptions:
    """Options with what the caller says in place of what they say."""
    for name, value, example in (("formula", formula, '"CO"'), ("isotopologue", isotopologue, '"(12C)(16O)"')):
        if value is not None and not (isinstance(value, str) and value):
            raise InputError(problem(name, "not a name", expected=f"text such as {example}", found=shown(value)))
    if mass is not None and as_number("mass", mass, _MASS) <= 0.0:
        raise InputError(problem("mass", "impossible", expected=_MASS, found=shown(mass)))
    said: dict[str, Any] = {"formula": formula, "isotopologue": isotopologue, "mass": mass}
    return replace(base, **{name: value for name, value in said.items() if value is not None})


def check_account(lines: LineList) -> LineList:
    """The list itself.  Raises LineListError where its ledger and its lines do not agree."""
    ledger = lines.ledger
    if not ledger.adds_up() or ledger.kept != len(lines):
        found = f"{ledger.kept} kept and {sum(ledger.left_out.values())} left out of {ledger.read}, {len(lines)} lines"
        what = "the account of the records does not add up, a fault of this program"
        raise LineListError(problem(", ".join(lines.files), what, found=found))
    return lines


def only(lines: LineList, name: str) -> LineList:
    """The lines of one isotopologue, by formula or local number; InputError where there is none of that name."""
    refuse_unless_among(lines.isotopologues, name)
    return of_isotopologue(lines, name)


def of_isotopologue(lines: LineList, name: str) -> LineList:
    """The lines of one isotopologue, by formula or local number, which may be none; all of an unknown molecule."""
    if not lines.isotopologues or not lines.isotopologues[0].known:
        return lines
    chosen = np.array([one.is_called(name) for one in lines.isotopologues])
    return lines.select(chosen[lines.isotopologue], "another isotopologue than the one chosen")


def refuse_unless_among(found: Sequence[Isotopologue], name: str) -> None:
    """Raise InputError where none of a list's isotopologues has that name; those of an unknown molecule have any."""
    if not found or not found[0].known or any(one.is_called(name) for one in found):
        return
    molecule = found[0].molecule_formula
    exist = isotopologues_of(molecule)
    known = any(one.is_called(name) for one in exist)
    what = f"the list holds no line of {name}" if known else f"{molecule} has no isotopologue {name}"
    expected = ", ".join(f"{one.formula} ({one.local})" for one in (found if known else exist))
    raise InputError(problem("isotopologue", what, expected=expected)).about("isotopologue")


def _read_one(path: Path, format: str | None, options: ReadOptions, leave_out: bool) -> LineList:
    """The lines of one file.  Raises LineListError for a record that can't be right, or a file that holds none."""
    if is_catalogue(path, format):
        if options.formula is None or options.isotopologue is None:
            raise InputError(
                problem(
                    path,
                    "a catalogue does not name its molecule",
                    expected='formula and isotopologue such as formula="CO", isotopologue="(12C)(16O)"',
                    found=f"formula {shown(options.formula)}, isotopologue {shown(options.isotopologue)}",
                )
            )
        if options.widths:
            raise LineListError(
                problem(
                    path,
                    "J'' is not read from catalogues, so that broadening files cannot serve them",
                    remedy="give [broadening.default] widths",
                )
            )
        return catalogue_lines(
            path,
            formula=options.formula,
            isotopologue=options.isotopologue,
            mass=options.mass,
            bad_records="leave-out" if leave_out else "stop",
        )
    parse = parser_of(path, format)
    others = ForeignRecords(path, options.formula)
    batches = [judge(parse(chunk), options, leave_out, others) for chunk in read_chunks(path) if len(chunk)]
    if not batches:
        raise LineListError(problem(path, "holds no record", expected="lines", remedy="fetch the file again"))
    others.refuse_if_all()
    return merge(batches)


def is_catalogue(path: Path, format: str | None) -> bool:
    """Whether a file is a catalogue, by format, or by its ending where that is None."""
    return format == "catalogue" or (format is None and plain_name(path.name).lower().endswith(".cat"))


def parser_of(path: Path, format: str | None) -> Parser:
    """The parser of a file's chunks, by format, or by the file's ending where it is None."""
    chosen = format or ("hapi" if is_hapi(path) else "hitran")
    if chosen not in READERS:
        expected = " or ".join(f'"{name}"' for name in READERS)
        raise InputError(problem("format", "unknown line-list format", expected=expected, found=f'"{chosen}"'))
    return READERS[chosen](path)


def merge(lists: Sequence[LineList]) -> LineList:
    """One list from several, sorted by wavenumber; lines of equal wavenumber keep the order of the files."""
    if len(lists) == 1:
        return lists[0]
    known: list[tuple[Isotopologue, StrengthBasis]] = []
    dropped: list[Isotopologue] = []
    files: list[str] = []
    index, file = [], []
    ledger = Ledger()
    for one in lists:
        pairs = list(zip(one.isotopologues, one.basis, strict=True))
        known += [pair for pair in pairs if pair not in known]
        dropped += [iso for iso in one.dropped if iso not in dropped]
        place = np.array([known.index(pair) for pair in pairs] or [0], dtype=np.int16)
        index.append(place[one.isotopologue] if len(one) else one.isotopologue)
        files += [name for name in one.files if name not in files]
        number = np.array([files.index(name) for name in one.files], dtype=np.int16)
        file.append(number[one.file] if len(one) else one.file)
        ledger.add(one.ledger)
    wavenumber = np.concatenate([one.wavenumber for one in lists])
    order = np.argsort(wavenumber, kind="stable")

    def column(name: str) -> FloatArray:
        return np.asarray(np.concatenate([getattr(one, name) for one in lists])[order])

    names = sorted({name for one in lists for name in one.broadeners})
    return LineList(
        wavenumber=wavenumber[order],
        strength=column("strength"),
        lower_energy=column("lower_energy"),
        einstein_a=column("einstein_a"),
        upper_weight=column("upper_weight"),
        lower_weight=column("lower_weight"),
        isotopologue=np.concatenate(index)[order],
        isotopologues=tuple(one for one, _ in known),
        basis=tuple(basis for _, basis in known),
        broadeners={name: _merge_broadener(name, lists, order) for name in names},
        record=np.concatenate([one.record for one in lists])[order],
        file=np.concatenate(file)[order],
        files=tuple(files),
        ledger=ledger,
        dropped=tuple(iso for iso in dropped if iso not in [one for one, _ in known]),
    )


def _merge_broadener(name: str, lists: Sequence[LineList], order: NDArray[np.intp]) -> BroadenerColumns:
    def join(part: str) -> FloatArray:
        pieces = [
            getattr(one.broadeners[name], part) if name in one.broadeners else np.full(len(one), np.nan)
            for one in lists
        ]
        return np.asarray(np.concatenate(pieces)[order])

    return BroadenerColumns(join("gamma"), join("exponent"), join("shift"))
