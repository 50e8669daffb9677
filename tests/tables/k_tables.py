"""Small invented k-coefficient tables; nothing in them is of a real molecule."""

from __future__ import annotations

import numpy as np

from opacity.tables.k_model import KTable
from opacity.tables.k_write import write_k_table


def intervals(edges):
    """Bounds (..., n, 2) of the intervals between edges (..., n + 1)."""
    return np.stack([edges[..., :-1], edges[..., 1:]], axis=-1)


def invented_k_table(
    temperatures=(300.0, 700.0, 1200.0),
    pressures=(1e-4, 1e-2, 1.0, 10.0),
    bands=3,
    points=4,
    scale=1e-20,
    profile=False,
    per_band=False,
    cells=0,
    means=False,
    **changes,
):
    """Random values from `scale` to `points` times 11 times it, the lowest point of the first band 0 at all nodes."""
    random = np.random.default_rng(7)
    temperature, pressure = np.array(temperatures), np.array(pressures)
    nodes = (temperature.size,) if profile else (temperature.size, pressure.size)
    k = scale * np.cumsum(1.0 + 10.0 * random.random((*nodes, bands, points)), axis=-1)
    k[..., 0, 0] = 0.0
    edges = 1.0 - (1.0 - np.arange(points + 1) / points) ** 2
    if per_band:
        edges = np.array([edges ** (1.0 + 0.1 * band) for band in range(bands)])
    bounds = intervals(edges)
    wavenumbers = np.linspace(2000.0, 2300.0, bands + 1)
    content = {
        "title": "Invented molecule",
        "formula": "CO",
        "temperature": temperature,
        "pressure": pressure,
        "band_bounds": intervals(wavenumbers),
        "g": bounds.mean(axis=-1).reshape(-1, points).mean(axis=0),
        "g_bounds": bounds,
        "g_weight": bounds[..., 1] - bounds[..., 0],
        "k_coefficient": k,
        "quadrature": "matched",
        "recipe": '[molecule]\nname = "invented, with π"\n',
        "provenance": {"program": {"name": "opacity", "version": "0"}, "line_lists": [{"file": "CO.par"}]},
        "checks": {
            "certificate": {"bands": [{"largest": 1e-3 * (-1) ** b * (b + 1), "p99": 5e-4} for b in range(bands)]}
        },
        "profile": profile,
    }
    if cells:
        content["fine_cells"] = np.sort(scale * (1.0 + random.random((*nodes, bands, cells))), axis=-1)
        content["cell_bounds"] = intervals(1.0 - (1.0 - np.arange(cells + 1) / cells) ** 2)
    if means:
        content["planck_mean"], content["rosseland_mean"] = scale * (1.0 + random.random((2, *nodes)))
    return KTable(**{**content, **changes})


def written(path, table):
    """The path of the table, written."""
    write_k_table(path, table)
    return path
