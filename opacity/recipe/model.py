"""What a recipe says, as frozen values: read-only, in the units used inside, with no reference to files' content.

Units: cm-1, K, bar; half-widths in cm-1/bar at 296 K.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from opacity.arguments import DefaultWidth
from opacity.chi_factors import chi_table
from opacity.errors import InputError, problem
from opacity.grids import FloatArray


@dataclass(frozen=True)
class Molecule:
    """`mass` (g/mol) is given only for a molecule that hapi does not know."""

    name: str
    formula: str
    mass: float | None = None


@dataclass(frozen=True)
class LineListSource:
    """One `[[line_list]]`: files as written in the recipe, `paths` as found beside it.

    `format` is "hitran", "hapi", "exomol" or "catalogue"; with the latter two there is an `isotopologue`.
    `sha256` is what the recipe says of some of the `paths`.
    """

    format: str
    files: tuple[str, ...]
    paths: tuple[Path, ...]
    range: tuple[float, float] | None = None
    isotopologue: str | None = None
    reference: str = ""
    bad_records: str = "stop"
    sha256: dict[Path, str] = field(default_factory=dict)


@dataclass(frozen=True)
class PartitionFunctionChoice:
    """`source` is "TIPS-2021", "TIPS-2025", "file", or "states": the sum over the states of a list in ExoMol format.

    `path` is the file of T (K) and Q; `file` its name in the recipe, None where it is the .pf among a list's files.
    """

    source: str
    file: str | None = None
    path: Path | None = None


@dataclass(frozen=True)
class Broadening:
    """`mixture`: mole fraction by broadener, sum 1.

    `files`: .broad files by broadener, for lists that give no widths by it; `default`: widths for lines for which
    neither list nor file gives any.
    """

    mixture: dict[str, float]
    default: dict[str, DefaultWidth] = field(default_factory=dict)
    files: dict[str, Path] = field(default_factory=dict)


@dataclass(frozen=True)
class CutoffStep:
    """`cutoff` (cm-1) holds up to and including `to_pressure` (bar); None means for all higher pressures."""

    cutoff: float
    to_pressure: float | None = None


@dataclass(frozen=True)
class Cutoff:
    """Distance from the unshifted line centre up to which a line counts, by pressure."""

    steps: tuple[CutoffStep, ...]

    def at(self, pressure: float) -> float:
        """The cut-off (cm-1) at a pressure (bar)."""
        for step in self.steps:
            if step.to_pressure is None or pressure <= step.to_pressure:
                return step.cutoff
        raise InputError(
            problem(
                "profile.cutoff",
                "no cut-off for this pressure",
                expected="a last step without to_pressure",
                found=f"{pressure:g} bar",
            )
        )


@dataclass(frozen=True)
class Profile:
    """How a line's profile is cut and how exactly it is summed."""

    cutoff: Cutoff
    tolerance: float = 1e-3
    plinth: bool = False
    chi: str | None = None

    @property
    def chi_table(self) -> FloatArray:
        """The rows of the chi factors chosen, (n_rows, 3); none where none are."""
        return chi_table(self.chi)


@dataclass(frozen=True)
class Grid:
    """Axes of the table.  With `nodes` the table is a profile: one spectrum for each (T, P) pair."""

    wavenumber: FloatArray
    temperature: tuple[float, ...]
    pressure: tuple[float, ...]
    nodes: tuple[tuple[float, float], ...] | None = None

    def node_list(self) -> tuple[tuple[float, float], ...]:
        """All (T, P) of the table, temperature slowest."""
        if self.nodes is not None:
            return self.nodes
        return tuple((t, p) for t in self.temperature for p in self.pressure)


@dataclass(frozen=True)
class BandStrength:
    """A published integrated strength that `check` holds the table against.

    It is per molecule of one `isotopologue`, of the "natural" mixture, or, where that is None, of the recipe's own.
    `uncertainty` is relative, one standard deviation, None where none was published.
    """

    name: str
    range: tuple[float, float]
    strength: float
    unit: str
    temperature: float
    uncertainty: float | None
    source: str
    isotopologue: str | None = None

    @property
    def sanity_only(self) -> bool:
        """Whether only errors of a factor can be seen by it: it is from memory, or has no uncertainty."""
        return self.uncertainty is None or self.source.lower().startswith("from memory")


@dataclass(frozen=True)
class Bands:
    """How bands are given: `kind` is "resolving_power" or "width" (cm-1) over the grid's range, with one value, or
    "edges" (cm-1) or "wavelength" (micrometres in vacuum), with all of them.
    """

    kind: str
    values: tuple[float, ...]


@dataclass(frozen=True)
class KCoefficientChoice:
    """A k-coefficient table: `g_points` is None where as many are wanted as `transmission_error` asks for.

    `weights` are "optimised" for all nodes and bands, "optimised-per-band" or "fixed".
    """

    bands: Bands
    g_points: int | None
    transmission_error: float
    quadrature: str
    weights: str


@dataclass(frozen=True)
class Species:
    """A molecule of a mixture: its recipe, with the mixture's grid and profile, and its mole `fraction`."""

    recipe: Recipe
    fraction: float


@dataclass(frozen=True)
class Recipe:
    """A whole recipe.  `abundance` is "terrestrial", "pure", or fractions by isotopologue.

    That of a mixture has `species` and no line lists, partition function or broadening of its own.
    `cross_section` and `k_coefficient` say which tables are wanted, one of them at least.
    `accept_unverified` says that values from memory may be used.
    """

    path: Path
    text: str
    molecule: Molecule
    line_lists: tuple[LineListSource, ...]
    abundance: str | dict[str, float]
    partition_function: PartitionFunctionChoice
    broadening: Broadening
    profile: Profile
    grid: Grid
    band_strengths: tuple[BandStrength, ...] = ()
    cross_section: bool = True
    k_coefficient: KCoefficientChoice | None = None
    species: tuple[Species, ...] = ()
    accept_unverified: bool = False

    @property
    def parts(self) -> tuple[Recipe, ...]:
        """The recipes of the species of a mixture, or this one."""
        return tuple(one.recipe for one in self.species) or (self,)

    @property
    def name(self) -> str:
        """The recipe file's name without its ending: tables are named after it."""
        return self.path.stem
