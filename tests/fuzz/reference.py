"""Slow readers, a line at a time in plain Python, of what the package reads in kernels: the truth for its fuzzing."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass

from opacity.errors import MoleculeError
from opacity.molecule.isotopologue import LOCAL_CODES, isotopologue

NUMBER = re.compile(rb"([+-]?(?:\d+\.?\d*|\.\d+))(?:[eE]([+-]?\d+)|([+-]\d{3}))?")
BAD = object()
"""What stands for a field that is no number; NaN is one that is blank."""


def number(field: bytes, tabs: bool = False) -> float | object:
    """A decimal number as `float` gives it, NaN for a blank field or one of # alone, else BAD."""
    field = field.strip(b"\t").strip(b" ") if tabs else field.strip(b" ")
    if not field.strip(b"#"):
        return math.nan
    match = NUMBER.fullmatch(field)
    if match is None:
        return BAD
    return float(match[1] + b"e" + (match[2] or match[3] or b"0"))


def lines_of(data: bytes) -> Iterator[tuple[int, bytes]]:
    """Lines that are not blank, with their numbers, without LF or CRLF."""
    for place, line in enumerate(data.split(b"\n"), start=1):
        line = line[:-1] if line.endswith(b"\r") else line
        if line.strip(b" \t"):
            yield place, line


def is_plain(line: bytes) -> bool:
    return all(32 <= byte <= 126 or byte == 9 for byte in line)


@dataclass
class Record:
    """What a record says: numbers by name, or why it can't be right."""

    line: int
    fault: str | None
    numbers: dict[str, float]


HITRAN = {
    "molecule": (0, 2), "wavenumber": (3, 15), "strength": (15, 25), "einstein_a": (25, 35), "gamma_air": (35, 40),
    "gamma_self": (40, 45), "lower_energy": (45, 55), "exponent_air": (55, 59), "shift_air": (59, 67),
    "upper_weight": (146, 153), "lower_weight": (153, 160),
}  # fmt: skip


def records(data: bytes) -> list[Record]:
    """Records of 160 characters, judged."""
    found = []
    for place, line in lines_of(data):
        whole = len(line) >= 160 and not line[160:].strip(b" \t")
        fields = {name: number(line[first:last]) for name, (first, last) in HITRAN.items()} if whole else {}
        found.append(_judged(place, line, whole, fields, line[2:3], {"air", "self"}))
    return found


def _judged(
    place: int, line: bytes, whole: bool, fields: dict[str, float | object], code: bytes, broadeners: set[str]
) -> Record:
    numbers = {name: value for name, value in fields.items() if isinstance(value, float)}
    if not whole:
        return Record(place, "length", {})
    if not is_plain(line):
        return Record(place, "text", {})
    if len(numbers) < len(fields):
        return Record(place, "number", {})
    return Record(place, _fault(numbers, code, broadeners), numbers)


def _fault(numbers: dict[str, float], code: bytes, broadeners: set[str]) -> str | None:
    nu, s, energy, molecule = (numbers[name] for name in ("wavenumber", "strength", "lower_energy", "molecule"))
    if any(math.isnan(value) for value in (nu, s, energy, molecule)):
        return "missing"
    if any(math.isinf(value) for value in numbers.values()):
        return "infinite"
    if not (1.0 <= molecule <= 999.0 and molecule == int(molecule)):
        return "molecule"
    impossible = nu < 1e-6 or s < 0.0 or not -1.0 <= energy <= 100_000.0 or 0.0 < s < 1e-170
    if impossible or numbers.get("einstein_a", 0.0) < 0.0:
        return "impossible"
    if s > 0.0 and math.log(s) + 1.4387768775039337 / 296.0 * energy > math.log(1e-6):
        return "too strong"
    for name in broadeners:
        gamma, shift = numbers[f"gamma_{name}"], numbers.get(f"shift_{name}", math.nan)
        if gamma < 0.0 or gamma > 1000.0 or abs(shift) > 1000.0 or abs(numbers.get(f"exponent_{name}", 0.0)) > 10.0:
            return "broadener"
    try:
        isotopologue(int(molecule), LOCAL_CODES[code.decode()])
    except (KeyError, MoleculeError):
        return "isotopologue"
    return None


def hapi_records(header: bytes, data: bytes) -> list[Record]:
    """Records of a hapi table whose header is known to be good."""
    tree = json.loads(header)
    spans = {}
    for name, start in tree["position"].items():
        match = re.match(r"%(\d+)", tree["format"][name])
        assert match is not None
        spans[name] = (int(start), int(start) + int(match[1]))
    extra = [str(name) for name in tree.get("extra", [])]
    separator = str(tree.get("extra_separator", ",")).encode()
    width = max(stop for _, stop in spans.values())
    named = {name: known for name in (*spans, *extra) if (known := _name(name)) is not None}
    broadeners = {known.split("_", 1)[1] for known in named.values() if known.startswith("gamma_")}
    found = []
    for place, line in lines_of(data):
        behind = line[width:] if len(line) >= width else None
        if behind is not None:
            for blank in (b" \t", b" ", b"\t"):
                if not set(blank) & {separator[-1]}:
                    behind = behind.rstrip(blank)
                    break
        parts = behind.split(separator) if behind is not None else []
        first = number(parts[0], tabs=True) if parts else BAD
        whole = len(parts) == len(extra) + 1 and isinstance(first, float) and math.isnan(first)
        fields: dict[str, float | object] = {}
        if whole:
            fields = {known: number(line[slice(*spans[name])]) for name, known in named.items() if name in spans}
            values = dict(zip(extra, parts[1:], strict=True))
            fields |= {known: number(values[name], tabs=True) for name, known in named.items() if name in values}
        place_of_code = spans["local_iso_id"][0]
        found.append(_judged(place, line, whole, fields, line[place_of_code : place_of_code + 1], broadeners))
    return found


_NAMES = {
    "molec_id": "molecule", "nu": "wavenumber", "sw": "strength", "a": "einstein_a", "elower": "lower_energy",
    "gp": "upper_weight", "gpp": "lower_weight",
}  # fmt: skip


def _name(name: str) -> str | None:
    match = re.fullmatch(r"(gamma|n|delta)_([a-z][a-z0-9]*)", name.lower())
    kinds = {"gamma": "gamma", "n": "exponent", "delta": "shift"}
    return f"{kinds[match[1]]}_{match[2]}" if match else _NAMES.get(name.lower())


CATALOGUE = {
    "frequency": (0, 13), "error": (13, 21), "intensity": (21, 29), "energy": (31, 41), "tag": (44, 51),
}  # fmt: skip


def catalogue_records(data: bytes) -> list[Record]:
    """Records of a catalogue, judged; the unit of the frequency is still that of the record."""
    found = []
    for place, line in lines_of(data):
        if len(line) < 51 or not is_plain(line):
            found.append(Record(place, "length" if len(line) < 51 else "text", {}))
            continue
        fields = {name: number(line[first:last]) for name, (first, last) in CATALOGUE.items()}
        fields["weight"] = _weight(line[41:44])
        numbers = {name: value for name, value in fields.items() if isinstance(value, float)}
        digits = all(48 <= line[last - 1] <= 57 for last in (13, 21, 29, 41, 44, 51))
        bad = len(numbers) < 6 or any(math.isnan(value) for value in numbers.values()) or not digits
        found.append(Record(place, "number" if bad else _catalogue_fault(numbers), numbers))
    return found


def _weight(field: bytes) -> float | object:
    if 65 <= field[0] <= 90 and 48 <= field[1] <= 57:
        tens = number(field[1:])
        return 1000.0 + 100.0 * (field[0] - 65) + tens if isinstance(tens, float) else BAD
    return number(field)


def _catalogue_fault(numbers: dict[str, float]) -> str | None:
    good = (
        0.0 < numbers["frequency"] <= 1e10
        and abs(numbers["error"]) <= 1e10
        and -300.0 <= numbers["intensity"] <= 10.0
        and -1.0 <= numbers["energy"] <= 1e6
        and 0.0 < numbers["weight"] <= 3599.0
        and numbers["weight"] == math.floor(numbers["weight"])
        and 0.0 < abs(numbers["tag"]) < 1e7
        and numbers["tag"] == math.floor(numbers["tag"])
    )
    return None if good else "impossible"


def rows(data: bytes) -> list[tuple[int, list[bytes], bytes]]:
    """Rows parted by blanks: line number, words, text."""
    return [(place, [word for word in re.split(rb"[ \t]+", line) if word], line) for place, line in lines_of(data)]


def whole(word: bytes) -> int | None:
    """A whole number of up to 18 digits."""
    return int(word) if re.fullmatch(rb"\d{1,18}", word) else None


def states(data: bytes) -> dict[int, tuple[float, float, float]] | int:
    """Energy, weight and J by id, or the number of the first line that can't be right."""
    found: dict[int, tuple[float, float, float]] = {}
    twice: int | None = None
    for place, words, line in rows(data):
        values = [number(word) for word in words[1:4]]
        key = whole(words[0])
        if not is_plain(line) or key is None or len(values) < 3 or not all(map(_finite, values)):
            return place
        energy, weight, j = (value for value in values if isinstance(value, float))
        if not (-1.0 <= energy <= 1e6 and 0.0 <= weight <= 1e9 and 0.0 <= j <= 1e4 and j % 0.5 == 0.0):
            return place
        if key in found and twice is None:
            twice = place
        found.setdefault(key, (energy, weight, j))
    return found if twice is None else twice


def _finite(value: float | object) -> bool:
    return isinstance(value, float) and math.isfinite(value)


def transitions(data: bytes, table: dict[int, tuple[float, float, float]]) -> list[Record]:
    """Rows of a .trans file joined with states."""
    found = []
    for place, words, _ in rows(data):
        upper, lower = (whole(word) for word in (*words[:2], b"", b"")[:2])
        values = [number(word) for word in words[2:4]]
        if upper is None or lower is None or not 3 <= len(words) <= 4 or any(not _is_number(one) for one in values):
            found.append(Record(place, "unreadable", {}))
            continue
        (a, *_) = (one for one in values if isinstance(one, float))
        found.append(_joined(place, table.get(upper), table.get(lower), a))
    return found


def _is_number(value: float | object) -> bool:
    return isinstance(value, float) and not math.isnan(value)


State = tuple[float, float, float]


def _joined(place: int, upper: State | None, lower: State | None, a: float) -> Record:
    if upper is None or lower is None:
        return Record(place, "state", {})
    nu = upper[0] - lower[0]
    if nu <= 0.0 or not 0.0 <= a < math.inf or not -1.0 <= lower[0] < 2**32 * 2.5e-5 - 2.0:
        return Record(place, "impossible", {})
    log = -math.inf
    if a > 0.0 and upper[1] > 0.0:
        log = math.log(upper[1]) + math.log(a) - 2.0 * math.log(nu)
        log -= math.log(8.0 * math.pi * 2.99792458e10)
        if not -400.0 <= log <= math.log(1e-6):
            return Record(place, "strength", {})
    return Record(place, None, {"wavenumber": nu, "log": log, "energy": lower[0], "j": lower[2], "j_upper": upper[2]})


def partition(data: bytes) -> list[tuple[float, float]] | None:
    """Rows of T and Q, None where one can't be right."""
    found: list[tuple[float, float]] = []
    for line in data.decode("ascii").split("\n"):
        if line.strip():
            words = line.split()[:2]
            if len(words) < 2 or not all(_reads_as_float(word) for word in words):
                return None
            temperature, value = (float(word) for word in words)
            if not ((found[-1][0] if found else 0.0) < temperature < math.inf and 0.0 < value < math.inf):
                return None
            found.append((temperature, value))
    return found


def _reads_as_float(word: str) -> bool:
    try:
        float(word)
    except ValueError:
        return False
    return "_" not in word
