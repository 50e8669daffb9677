"""Small invented tables; nothing in them is of a real molecule."""

from __future__ import annotations

import numpy as np
import pytest

from opacity.tables.model import CrossSectionTable


def invented_table(
    temperatures=(300.0, 700.0, 1200.0),
    pressures=(1e-4, 1e-2, 1.0, 10.0),
    points=400,
    scale=1e-20,
    profile=False,
    **changes,
):
    """Random values from `scale` to 11 times it, the first ten points 0 at all nodes."""
    temperature, pressure = np.array(temperatures), np.array(pressures)
    nodes = (temperature.size,) if profile else (temperature.size, pressure.size)
    values = scale * (1.0 + 10.0 * np.random.default_rng(7).random((*nodes, points)))
    values[..., :10] = 0.0
    content = {
        "title": "Invented molecule",
        "formula": "CO",
        "temperature": temperature,
        "pressure": pressure,
        "wavenumber": np.linspace(2000.0, 2300.0, points),
        "cross_section": values,
        "recipe": '[molecule]\nname = "invented, with π"\n',
        "provenance": {"program": "opacity", "inputs": [{"file": "CO.par", "lines": 3}]},
        "checks": {"tolerance": 1e-3, "audit": {"largest_error": 4e-4, "p99_error": 1e-4}},
        "profile": profile,
    }
    return CrossSectionTable(**{**content, **changes})


@pytest.fixture
def make_table():
    return invented_table
