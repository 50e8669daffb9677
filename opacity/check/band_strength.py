"""Published integrated band strengths against the integral of a table over the band.

A strength is per molecule of the table's own mixture, unless the recipe says that it is of one isotopologue or of the
natural mixture: then the table's integral is corrected for the abundances that the recipe chose.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np

from opacity.check.closure import JUDGED_BELOW, Closure, strength_between
from opacity.check.result import CANNOT_JUDGE, CheckResult, judge
from opacity.check.spectra import Spectra, interpolated, nodes_of
from opacity.cross_sections.prepare import PreparedLines, fraction_of
from opacity.cross_sections.source import LineSource, as_source, exact_points
from opacity.grids import FloatArray
from opacity.recipe.model import BandStrength, Profile
from opacity.tables import interpolate
from opacity.units import band_strength_to_cm_per_molecule

STANDARD_DEVIATIONS = 2.0
"""A band agrees within this many of the published standard deviations."""
SANITY_FACTOR = 1.5
"""A strength from memory, or one published without an uncertainty, agrees within this factor."""
SAMPLE = 400
"""Points of a band at which the cost of interpolation is taken."""

Abundance = str | Mapping[str, float]


def integral_between(wavenumber: FloatArray, values: FloatArray, lower: float, upper: float) -> float:
    """Trapezoid integral of values (n_nu,) between two wavenumbers that need not be grid points."""
    inside = (wavenumber > lower) & (wavenumber < upper)
    points = np.concatenate([[lower], wavenumber[inside], [upper]])
    ends = np.interp([lower, upper], wavenumber, values)
    return float(np.trapezoid(np.concatenate([[ends[0]], values[inside], [ends[1]]]), points))


def check_band(
    band: BandStrength,
    spectra: Spectra,
    pressure: float | None,
    lines: LineSource | PreparedLines,
    profile: Profile,
    executor: Executor | None = None,
    abundance: Abundance = "pure",
) -> CheckResult:
    """Judge one band at the published temperature and a pressure (bar) at which the table resolves it.

    It cannot be judged where the band or the temperature is not inside the table, no pressure is resolved, the table
    has no node at the temperature and interpolating costs too much, or it does not hold the isotopologue.
    """
    name = f"band {band.name}"
    nu = spectra.wavenumber
    if band.range[0] < nu[0] or band.range[1] > nu[-1]:
        detail = f"{band.range[0]:g}-{band.range[1]:g} cm-1 is not all inside the table ({nu[0]:g}-{nu[-1]:g})"
        return CheckResult(name, CANNOT_JUDGE, detail)
    if pressure is None:
        return CheckResult(name, CANNOT_JUDGE, "the step is too coarse for the lines at every pressure")
    spectrum = _spectrum_at(spectra, band.temperature, pressure)
    if spectrum is None:
        return CheckResult(name, CANNOT_JUDGE, f"the table has no spectrum at {band.temperature:g} K")
    share = _share(band, as_source(lines), abundance)
    if share.fraction <= 0.0:
        return CheckResult(name, CANNOT_JUDGE, f"the table holds no line of {band.isotopologue} in the band")
    published = band_strength_to_cm_per_molecule(band.strength, band.unit)
    found = (integral_between(nu, spectrum, *band.range) - share.others) / share.fraction
    above, below = _limits(band)
    between = ""
    if not np.any(spectra.temperature == band.temperature):
        cost = _interpolation_cost(band, spectra, pressure, as_source(lines), profile, executor)
        between = f", interpolated at a cost of {cost:+.1e}"
        if not abs(cost) <= 0.5 * above:
            detail = (
                f"no node at {band.temperature:g} K, and interpolating between nodes changes the band by {cost:+.1%}"
            )
            return CheckResult(name, CANNOT_JUDGE, detail)
    value = found / published - 1.0
    detail = (
        f"{found:.4e} against {published:.4e} cm/molecule{share.words}, {_difference(band, value)};"
        f" {band.temperature:g} K{between}, {pressure:.3g} bar; {band.source}"
    )
    return judge(name, value, above if value > 0.0 else below, detail)


def _limits(band: BandStrength) -> tuple[float, float]:
    """How far above and below a band its integral may be, relative; both positive."""
    if band.sanity_only or band.uncertainty is None:
        return SANITY_FACTOR - 1.0, 1.0 - 1.0 / SANITY_FACTOR
    return (STANDARD_DEVIATIONS * band.uncertainty,) * 2


def _difference(band: BandStrength, value: float) -> str:
    """A relative difference in per cent and in uncertainties, or the factor where only that can be judged."""
    if not band.sanity_only and band.uncertainty is not None:
        return f"{100.0 * value:+.2f} % ({abs(value) / band.uncertainty:.1f} uncertainties)"
    why = "no uncertainty is published" if band.uncertainty is None else "a value from memory"
    return f"{1.0 + value:.2g} times as much ({why}: within a factor {SANITY_FACTOR:g} is taken to agree)"


@dataclass(frozen=True)
class _Share:
    """What of a table's integral is not of the band's isotopologues (cm/molecule), and the fraction that these make."""

    others: float = 0.0
    fraction: float = 1.0
    words: str = ""


def _share(band: BandStrength, source: LineSource, abundance: Abundance) -> _Share:
    """How the integral per molecule of the table's mixture becomes one per molecule of what the band is of."""
    if band.isotopologue is None:
        return _Share()
    natural, fractions, others = band.isotopologue == "natural", {}, 0.0
    for part in source.stretches():
        first = np.searchsorted(part.wavenumber, band.range[0])
        lines = part.part(slice(first, np.searchsorted(part.wavenumber, band.range[1], side="right")))
        strength = lines.strengths(band.temperature)
        for number, one in enumerate(lines.isotopologues):
            of_it = lines.isotopologue == number
            if not natural and not one.is_called(band.isotopologue):
                others += float(np.sum(strength[of_it]))
            elif np.any(of_it):
                fractions[one.formula] = fraction_of(one, abundance)
    fraction = sum(fractions.values())
    words = f" of the natural mixture, of which the table holds {100.0 * fraction:.4g} %"
    if not natural:
        words = f" of {band.isotopologue} alone, abundance {fraction:.6g}"
        words += f", less {others:.2e} of other isotopologues" if others else ""
    return _Share(others, fraction, words)


def _interpolation_cost(
    band: BandStrength,
    spectra: Spectra,
    pressure: float,
    source: LineSource,
    profile: Profile,
    executor: Executor | None,
) -> float:
    """How far interpolating in temperature moves the band's integral, relative; from the lines alone."""
    nu = spectra.wavenumber
    part = np.flatnonzero((nu >= band.range[0]) & (nu <= band.range[1]))
    sample = nu[part[:: max(part.size // SAMPLE, 1)]]
    temperatures = [*(float(t) for t in spectra.temperature), band.temperature]
    requests = [(temperature, pressure, sample) for temperature in temperatures]
    choice = profile.cutoff.at, profile.plinth, profile.chi_table
    *at_nodes, exact = exact_points(source, requests, *choice, executor)
    axes = spectra.temperature, np.array([pressure])
    between = interpolate.interpolate(np.array(at_nodes)[:, None, :], *axes, band.temperature, pressure)
    return float(np.sum(between) / max(float(np.sum(exact)), 1e-300) - 1.0)


def choose_pressure(
    band: BandStrength, accounts: Sequence[Closure], lines: LineSource | PreparedLines, profile: Profile
) -> float | None:
    """The pressure (bar) at which sampling and wings change a band least, near its temperature; None if all are coarse.

    At low pressure the step may not resolve the lines, at high pressure their wings leave the band.
    """
    nearest = min((abs(one.temperature - band.temperature) for one in accounts), default=0.0)
    near = [one for one in accounts if abs(one.temperature - band.temperature) <= nearest * (1.0 + 1e-9)]
    resolved = [one for one in near if one.at_risk <= JUDGED_BELOW]

    if len(resolved) < 2:
        return resolved[0].pressure if resolved else None
    whole, within = np.zeros(len(resolved)), np.zeros(len(resolved))
    for part in as_source(lines).stretches():
        first = np.searchsorted(part.wavenumber, band.range[0])
        last = np.searchsorted(part.wavenumber, band.range[1], side="right")
        for temperature in dict.fromkeys(one.temperature for one in resolved):
            columns = part.at_temperature(temperature)
            for i, one in enumerate(resolved):
                if one.temperature == temperature:
                    whole[i] += np.sum(columns.strength[first:last])
                    within[i] += strength_between(columns, one.pressure, band.range, profile)
    change = [one.at_risk for one in resolved] + np.abs(within / np.maximum(whole, 1e-300) - 1.0)
    return resolved[int(np.argmin(change))].pressure


def _spectrum_at(spectra: Spectra, temperature: float, pressure: float) -> FloatArray | None:
    for index, t, p in nodes_of(spectra):
        if abs(t - temperature) <= 1e-9 * t and abs(p - pressure) <= 1e-9 * p:
            return spectra.spectrum(*index)
    axis = spectra.temperature
    if spectra.profile or not axis[0] <= temperature <= axis[-1]:
        return None
    return interpolated(spectra, temperature, pressure)
