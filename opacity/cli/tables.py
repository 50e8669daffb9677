"""Commands that look into tables: `explain` and `compare`."""

from __future__ import annotations

import sys
from argparse import Namespace
from typing import TYPE_CHECKING

from opacity.cli import text
from opacity.cli.comparison import comparison_text

if TYPE_CHECKING:
    from opacity.check.explain import Explanation, LinePart, Width

DONE, FAILED = 0, 1


def explain(arguments: Namespace) -> int:
    """`opacity explain TABLE --at NU,T,P`: the lines that make a value."""
    from opacity.pipeline.explain import explain as explain_value

    wavenumber, temperature, pressure = arguments.at
    found = explain_value(
        arguments.table,
        wavenumber=wavenumber,
        temperature=temperature,
        pressure=pressure,
        recipe=arguments.recipe,
        lines=arguments.lines,
        quiet=arguments.quiet,
    )
    if arguments.json:
        print(text.as_json(found.as_dict()))
        return DONE
    print(text.facts(_facts(found)))
    if found.parts:
        print(lines_table(found.parts))
    return DONE


def _facts(found: Explanation) -> list[tuple[str, str]]:
    moved = found.wavenumber - found.asked
    nearest = "" if moved == 0.0 else f", the grid point nearest {found.asked:.10g} ({moved:+.2g} cm-1)"
    how = "a node" if found.at_node else "between nodes: the table's value is interpolated"
    facts = [
        ("table", found.table),
        ("point", f"{found.wavenumber:.10g} cm-1{nearest}"),
        ("at", f"{found.temperature:.10g} K, {found.pressure:.10g} bar, {how}"),
        ("value", f"{found.value:.6e} cm2/molecule"),
        ("exact sum", f"{found.exact:.6e} cm2/molecule{'' if found.at_node else ', at this temperature and pressure'}"),
        ("difference", _difference(found)),
        ("lines", f"{text.counted(found.lines, 'line')} in reach, within {found.cutoff:g} cm-1"),
    ]
    if found.parts:
        ten = min(10, found.lines)
        facts.append(("largest", f"the {ten} largest make {_share(found.share_of_ten)} of the exact sum"))
    return facts


def _difference(found: Explanation) -> str:
    size = "the exact sum is 0" if found.difference is None else f"{found.difference:+.1e} of the exact sum"
    if found.within is None:
        return f"{size}: what interpolating between nodes costs here, for which the table states no tolerance"
    return f"{size}, {'within' if found.within else 'NOT within'} the table's tolerance {found.tolerance:g}"


def _share(share: float) -> str:
    """A share in per cent that is 100 only where nothing is missing."""
    percent = 100.0 * share
    return f"{percent:.3g} %" if percent < 99.5 else f"{percent:.6g} %"


_HEAD = (
    f"{'part':>9} {'share':>8} {'wavenumber':>12} {'distance':>9} {'S(T)':>9} {'S(296 K)':>9} {'E lower':>9}"
    f" {'Lorentz':>8} {'Doppler':>8} {'shift':>9}"
)

_UNITS = (
    "part: cm2/molecule; wavenumber as listed, distance from the shifted centre to the point, E lower, half-widths"
    " (HWHM) and\nshift at this temperature and pressure: cm-1; S: cm/molecule with the abundances chosen"
)


def lines_table(parts: tuple[LinePart, ...]) -> str:
    """Lines by their part, with where each is from and what widens it; the last row says the units."""
    rows = [_HEAD]
    for one in parts:
        reference = "-" if one.strength_296 is None else f"{one.strength_296:.3e}"
        rows.append(
            f"{one.value:9.3e} {_share(one.share):>8} {one.wavenumber:12.6f} {one.distance:+9.4f} {one.strength:9.3e}"
            f" {reference:>9} {one.lower_energy:9.3f} {one.lorentz:8.2e} {one.doppler:8.2e} {one.shift:+9.2e}"
        )
        states = "" if one.upper_state is None else f", states {one.upper_state} to {one.lower_state}"
        place = f"{one.file}:{one.record}"
        rows.append(f"    {one.isotopologue} {place}{states}")
        rows += [f"        {_width(width, place)}" for width in one.widths]
    return "\n".join([*rows, _UNITS])


def _width(width: Width, place: str) -> str:
    source = "the record" if width.source == place else width.source
    notes = [note for note in width.notes if not note.startswith(f"{width.broadener} width from the default")]
    said = f"; {'; '.join(notes)}" if notes else ""
    return (
        f"{width.broadener} {width.fraction:g}: {width.gamma:.4g} cm-1/bar, exponent {width.exponent:g},"
        f" shift {width.shift:+.3g}, from {source}{said}"
    )


def compare(arguments: Namespace) -> int:
    """`opacity compare A B`: how far two tables, or a table and columns of numbers, are apart."""
    from opacity.pipeline.compare import compare as compare_tables

    found = compare_tables(
        arguments.a,
        arguments.b,
        at=arguments.at,
        columns=arguments.columns,
        axis=arguments.axis,
        unit=arguments.unit,
        mass=arguments.mass,
        bands=arguments.bands,
        plot=arguments.plot,
        recipe=arguments.recipe,
        lines=arguments.lines,
        quiet=arguments.quiet,
    )
    beyond = 0 if arguments.within is None else found.beyond(arguments.within)
    if arguments.json:
        content = found.as_dict()
        if arguments.within is not None:
            content |= {"within": arguments.within, "ratios_beyond": beyond}
        print(text.as_json(content))
    else:
        print(comparison_text(found, arguments.within))
    if arguments.plot:
        print(f"picture: {arguments.plot}", file=sys.stderr if arguments.json else sys.stdout)
    return FAILED if beyond else DONE
