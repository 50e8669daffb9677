"""Published integrated band strengths against the integral of a table over the band."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor

import numpy as np

from opacity.check.closure import JUDGED_BELOW, Closure, strength_between
from opacity.check.result import CANNOT_JUDGE, CheckResult, judge
from opacity.check.spectra import Spectra, interpolated, nodes_of
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LineSource, as_source, exact_points
from opacity.grids import FloatArray
from opacity.recipe.model import BandStrength, Profile
from opacity.tables import interpolate
from opacity.units import band_strength_to_cm_per_molecule

STANDARD_DEVIATIONS = 2.0
"""A band agrees within this many of the published standard deviations."""
SAMPLE = 400
"""Points of a band at which the cost of interpolation is taken."""


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
) -> CheckResult:
    """Judge one band at the published temperature and a pressure (bar) at which the table resolves it.

    It cannot be judged where the band or the temperature is not inside the table, no pressure is resolved, or the
    table has no node at the temperature and interpolating costs too much.
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
    published = band_strength_to_cm_per_molecule(band.strength, band.unit)
    found = integral_between(nu, spectrum, *band.range)
    value = found / published - 1.0
    limit = STANDARD_DEVIATIONS * band.uncertainty
    between = ""
    if not np.any(spectra.temperature == band.temperature):
        cost = _interpolation_cost(band, spectra, pressure, as_source(lines), profile, executor)
        between = f", interpolated at a cost of {cost:+.1e}"
        if not abs(cost) <= 0.5 * limit:
            detail = (
                f"no node at {band.temperature:g} K, and interpolating between nodes changes the band by {cost:+.1%}"
            )
            return CheckResult(name, CANNOT_JUDGE, detail)
    detail = (
        f"{found:.4e} against {published:.4e} cm/molecule ({abs(value) / band.uncertainty:.1f} standard deviations);"
        f" {band.temperature:g} K{between}, {pressure:.3g} bar; {band.source}"
    )
    return judge(name, value, limit, detail)


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
