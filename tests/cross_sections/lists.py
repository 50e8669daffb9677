"""Small generated line lists for tests of the sum: numbers drawn from a seed, no molecule's real lines."""

from __future__ import annotations

import numpy as np

from opacity.cross_sections.prepare import NodeLines
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import Isotopologue

CARBON_MONOXIDE = Isotopologue(5, 1, "(12C)(16O)", "CO", 27.994915, 0.98654)


def line_list(
    wavenumber: object,
    strength: object = 1e-20,
    energy: object = 100.0,
    gamma: object = 0.07,
    exponent: object = 0.7,
    shift: object = -0.003,
) -> LineList:
    """A list from numbers or arrays; widths and shifts per bar, by the broadener "air"."""
    nu = np.atleast_1d(np.asarray(wavenumber, dtype=np.float64))
    order = np.argsort(nu, kind="stable")

    def column(values: object) -> np.ndarray:
        return np.broadcast_to(np.asarray(values, dtype=np.float64), nu.shape)[order].copy()

    nothing = np.full(nu.size, np.nan)
    return LineList(
        wavenumber=nu[order],
        strength=column(strength),
        lower_energy=column(energy),
        einstein_a=nothing,
        upper_weight=nothing,
        lower_weight=nothing,
        isotopologue=np.zeros(nu.size, dtype=np.int16),
        isotopologues=(CARBON_MONOXIDE,),
        basis=(StrengthBasis(296.0, True, CARBON_MONOXIDE.abundance),),
        broadeners={"air": BroadenerColumns(column(gamma), column(exponent), column(shift))},
        record=np.arange(nu.size, dtype=np.int64),
        file=np.zeros(nu.size, dtype=np.int16),
        files=("generated",),
        ledger=Ledger(nu.size, nu.size),
    )


def random_list(n: int, low: float, high: float, seed: int) -> LineList:
    """`n` lines with strengths over 14 decades, clumps and duplicates among them."""
    rng = np.random.default_rng(seed)
    nu = rng.uniform(low, high, n)
    nu[: n // 10] = nu[n // 2] + rng.normal(0.0, 0.01, n // 10)
    nu[n // 10 : n // 8] = nu[0]
    return line_list(
        nu,
        strength=10.0 ** rng.uniform(-34, -20, n),
        energy=rng.uniform(0.0, 8000.0, n),
        gamma=10.0 ** rng.uniform(-3, 0, n),
        exponent=rng.uniform(-0.3, 1.2, n),
        shift=rng.normal(0.0, 0.01, n),
    )


def node(
    wavenumber: object, strength: object = 1e-20, doppler: object = 0.003, lorentz: object = 0.05, centre: object = None
) -> NodeLines:
    """Lines at a node straight from widths, so that tests can reach any y."""
    nu = np.atleast_1d(np.asarray(wavenumber, dtype=np.float64))

    def column(values: object) -> np.ndarray:
        return np.broadcast_to(np.asarray(values, dtype=np.float64), nu.shape).copy()

    return NodeLines(
        temperature=296.0,
        pressure=1.0,
        wavenumber=nu,
        centre=nu.copy() if centre is None else column(centre),
        strength=column(strength),
        doppler=column(doppler),
        lorentz=column(lorentz),
    )
