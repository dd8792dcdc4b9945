"""Every table's schema, once: columns with types, units and meaning.

To add a column: add it here, fill it in the stage that writes the table, and raise `VERSION`.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pyarrow as pa

from conetone.errors import TableError
from conetone.sprinkle.catalogue import PARAMETER_NAMES

# Part of every job's request: a new version makes old tables stale.
VERSION = 2

# Larger orders that are made of positions are stored as positions; their packed relations would take n²/16
# bytes, 25 MB at this size, and their links n³ steps.
LARGEST_PACKED = 20_000

Row = Mapping[str, Any]

TEXT, COUNT, REAL = pa.string(), pa.int64(), pa.float64()
REALS, COUNTS = pa.list_(pa.float64()), pa.list_(pa.int64())


@dataclass(frozen=True)
class Column:
    """One column. `measured` marks what differs between two runs of the same computation (time, memory)."""

    name: str
    type: pa.DataType
    meaning: str
    unit: str = "1"
    nullable: bool = False
    measured: bool = False

    @property
    def field(self) -> pa.Field:
        """The Arrow field, unit and meaning in its metadata."""
        return pa.field(self.name, self.type, self.nullable, {"unit": self.unit, "meaning": self.meaning})


@dataclass(frozen=True)
class Table:
    """A table: its name and columns, in order."""

    name: str
    columns: tuple[Column, ...]

    @property
    def schema(self) -> pa.Schema:
        """The Arrow schema."""
        return pa.schema([column.field for column in self.columns])

    @property
    def content_columns(self) -> list[str]:
        """Names of the columns that the same computation always fills alike."""
        return [column.name for column in self.columns if not column.measured]

    def build(self, rows: Sequence[Row]) -> pa.Table:
        """An Arrow table of these rows; raises TableError for an unknown, missing or wrongly null column."""
        names = [column.name for column in self.columns]
        for position, row in enumerate(rows):
            self._check_row(position, row, names)
        arrays = [pa.array([row[c.name] for row in rows], type=c.type) for c in self.columns]
        return pa.Table.from_arrays(arrays, schema=self.schema)

    def _check_row(self, position: int, row: Row, names: Iterable[str]) -> None:
        place = f"table {self.name}, row {position}"
        wrong = set(row) ^ set(names)
        if wrong:
            name = min(wrong)
            found = "an unknown column" if name in row else "no value for column"
            raise TableError(place, f"{found} {name}", f"exactly {', '.join(names)}")
        for column in self.columns:
            if row[column.name] is None and not column.nullable:
                raise TableError(
                    f"{place}, column {column.name}", "null", "a value: the column is not nullable"
                )


STATUS = (
    Column("status", TEXT, "ok, failed (no result) or suspect (a result that its audit refuses)"),
    Column("reason", TEXT, "why the status is not ok", nullable=True),
)
ENSEMBLE_KEYS = (
    Column("ensemble", TEXT, "name of the ensemble"),
    Column("dimension", COUNT, "spacetime dimension, null where the ensemble has none", nullable=True),
    *(
        Column(name, COUNT, f"the ensemble's parameter {name}", nullable=True)
        for name in PARAMETER_NAMES
        if name != "dimension"
    ),
    Column("count", TEXT, "whether every order has `size` elements (fixed) or a Poisson number (poisson)"),
)
REPLICATE_KEYS = (
    Column("point", TEXT, "id of the ensemble with its parameters at this size"),
    *ENSEMBLE_KEYS,
    Column("size", COUNT, "number of elements asked for", "elements"),
    Column("replicate", COUNT, "number of the replicate, from 0"),
)
OPERATOR_KEYS = (
    Column("matrix", TEXT, "matrix of the order: causal, link"),
    Column("part", TEXT, "self-adjoint part: symmetric M + Mᵀ, antisymmetric i(M − Mᵀ)"),
)
SERIES_KEYS = (
    Column("series", TEXT, "id of the ensemble with its parameters and the operator, across sizes"),
    *ENSEMBLE_KEYS,
    *OPERATOR_KEYS,
)
COSTS = (
    Column("seconds", REAL, "wall time of this row", "s", measured=True),
    Column("peak_mib", REAL, "largest memory of the job so far", "MiB", measured=True),
)

ORDERS = Table(
    "orders",
    (
        *REPLICATE_KEYS,
        Column("elements", COUNT, "number of elements", "elements", nullable=True),
        Column("relations", COUNT, "number of related pairs", nullable=True),
        Column(
            "links",
            COUNT,
            f"number of related pairs with nothing between, null above {LARGEST_PACKED} elements",
            nullable=True,
        ),
        Column("height", COUNT, "elements in the longest chain", "elements", nullable=True),
        Column("ordering_fraction", REAL, "related pairs over all pairs", nullable=True),
        Column("digest", TEXT, "SHA-256 of the packed relation or of the positions stored", nullable=True),
        Column(
            "packed_relation",
            pa.binary(),
            "upper triangle, one bit a pair, 64 rows a group; null where positions are stored",
            nullable=True,
        ),
        Column(
            "positions",
            REALS,
            f"of orders made of positions, above {LARGEST_PACKED} elements: element by element, time first",
            nullable=True,
        ),
        *COSTS,
        *STATUS,
    ),
)

SPECTRA = Table(
    "spectra",
    (
        *REPLICATE_KEYS,
        *OPERATOR_KEYS,
        Column("extent", TEXT, "full: every eigenvalue; leading: the largest of each sign"),
        Column("leading_count", COUNT, "eigenvalues of each sign asked for, null if full", nullable=True),
        Column("tolerance", REAL, "residuals allowed, relative to ‖A‖, null if full", nullable=True),
        Column("eigenvalues", REALS, "eigenvalues, ascending", nullable=True),
        Column(
            "residual_bound",
            REALS,
            "an eigenvalue of the matrix lies at most this far from each; null where every eigenvalue was"
            " computed, even if only the ends are kept",
            nullable=True,
        ),
        Column("elements", COUNT, "number of elements", "elements", nullable=True),
        Column("ordering_fraction", REAL, "related pairs over all pairs", nullable=True),
        Column("digest", TEXT, "digest of the order", nullable=True),
        Column("sum_defect", REAL, "|Σ λ| / (n ‖A‖), zero in exact arithmetic", nullable=True),
        Column(
            "square_sum_defect", REAL, "|Σ λ² − 2 Σ M²| / (n ‖A‖²), zero in exact arithmetic", nullable=True
        ),
        Column("pairing_defect", REAL, "max |λ_i + λ_(n+1−i)| / ‖A‖, antisymmetric part only", nullable=True),
        Column("solver", TEXT, "library routine that found the eigenvalues", nullable=True),
        Column("threads", COUNT, "BLAS threads; those of products, which change no number, aside"),
        *COSTS,
        *STATUS,
    ),
)

FITS = Table(
    "fits",
    (
        *SERIES_KEYS,
        Column("size", COUNT, "number of elements asked for", "elements"),
        Column("window", TEXT, "rule of the window, `average` for the average over windows and models"),
        Column("model", TEXT, "model of log λ against rank, `average` for the average"),
        Column("exponent", REAL, "α of |λ_r| ∝ r^−α at this size", nullable=True),
        Column("statistical", REAL, "standard error from the scatter of replicates", nullable=True),
        Column("misfit", REAL, "further error from `scatter`, for `average` also the spread", nullable=True),
        Column("scatter", REAL, "scatter τ of log λ about a power law beyond its errors", nullable=True),
        Column("chi2", REAL, "χ² of the bins and priors, errors and scatter in quadrature", nullable=True),
        Column("degrees", COUNT, "bins and priors less parameters", nullable=True),
        Column("bins_cut", COUNT, "bins of the shared data vector outside the window", nullable=True),
        Column("parameters", REALS, "the model's parameters: log amplitude, exponent, …", nullable=True),
        Column("weight", REAL, "weight in the average over windows and models", nullable=True),
        Column("copies", REALS, "exponent without each replicate in turn", nullable=True),
        Column("statistical_copies", REALS, "standard error without each replicate", nullable=True),
        Column("misfit_copies", REALS, "misfit without each replicate", nullable=True),
        Column("chi2_copies", REALS, "χ² without each replicate", nullable=True),
        Column("copies_replicate", COUNTS, "the replicate that each copy leaves out"),
        Column("ordering_fraction", REAL, "mean over replicates", nullable=True),
        Column("ordering_fraction_error", REAL, "its standard error", nullable=True),
        Column("replicates_used", COUNT, "replicates whose spectrum is ok and has ranks"),
        Column("replicates_failed", COUNT, "replicates whose spectrum is failed or suspect"),
        Column("replicates_attempted", COUNT, "replicates asked for"),
        *STATUS,
    ),
)  # fmt: skip

BINS = Table(
    "bins",
    (
        *SERIES_KEYS,
        Column("size", COUNT, "number of elements asked for", "elements"),
        Column("first_rank", COUNT, "smallest rank in the bin"),
        Column("last_rank", COUNT, "largest rank in the bin"),
        Column("rank", REAL, "geometric mean rank of the bin"),
        Column("log_magnitude", REAL, "mean of log λ over the bin and the replicates"),
        Column("log_magnitude_error", REAL, "its standard error over replicates"),
        Column(
            "window", TEXT, "window of the fit in the next columns, the best of the criterion", nullable=True
        ),
        Column("model", TEXT, "its model", nullable=True),
        Column("fitted", REAL, "the fit's log λ, null outside its window", nullable=True),
        Column("residual", REAL, "(log_magnitude − fitted) / log_magnitude_error", "σ", nullable=True),
    ),
)

PROFILES = Table(
    "profiles",
    (
        *SERIES_KEYS,
        Column("size", COUNT, "number of elements asked for", "elements"),
        Column("rank", REAL, "geometric mean rank of the bin"),
        Column("log_magnitude", REAL, "mean of log λ over the bin and the replicates"),
        Column("log_magnitude_error", REAL, "its standard error over replicates"),
        Column("slope_rank", REAL, "rank half-way to the next bin", nullable=True),
        Column("slope", REAL, "−Δ log λ / Δ log rank to the next bin", nullable=True),
        Column("slope_error", REAL, "its standard error over replicates", nullable=True),
    ),
)

EXPONENTS = Table(
    "exponents",
    (
        *SERIES_KEYS,
        Column("exponent", REAL, "α at infinite size", nullable=True),
        Column(
            "statistical", REAL, "jackknife error over replicates, through the whole chain", nullable=True
        ),
        Column("systematic", REAL, "spread and misfit of windows, models and scaling forms", nullable=True),
        Column("reduced_chi2", REAL, "χ²/ν of α(n) = α∞ + a n^−ω, weighted mean", nullable=True),
        Column(
            "scatter", REAL, "largest scatter of log λ about a power law beyond its errors", nullable=True
        ),
        Column("sizes", COUNTS, "sizes used", "elements"),
        Column("replicates_used", COUNT, "spectra that enter the exponent, all sizes together"),
        Column("replicates_failed", COUNT, "spectra that are failed or suspect"),
        Column("replicates_attempted", COUNT, "spectra asked for"),
        Column("expected", REAL, "exponent expected by theory", nullable=True),
        Column("expected_standing", TEXT, "exact, published or heuristic", nullable=True),
        Column("expected_source", TEXT, "where the expected exponent is from", nullable=True),
        Column("deviation", REAL, "(exponent − expected) / total error", "σ", nullable=True),
        Column("ordering_fraction", REAL, "mean at the largest size", nullable=True),
        Column("ordering_fraction_error", REAL, "its standard error", nullable=True),
        Column("ordering_fraction_expected", REAL, "exact expectation", nullable=True),
        Column("omegas", REALS, "the set of ω averaged over"),
        Column("omega_weights", REALS, "their weights", nullable=True),
        Column("copies", REALS, "exponent without one replicate of one size", nullable=True),
        Column("copies_size", COUNTS, "that size"),
        Column("copies_replicate", COUNTS, "that replicate"),
        Column("warnings", pa.list_(pa.string()), "what a reader should know before quoting the number"),
        *STATUS,
    ),
)

EXTRAPOLATIONS = Table(
    "extrapolations",
    (
        *SERIES_KEYS,
        Column("size", REAL, "size on the curve, ∞ at the limit", "elements"),
        Column("omega", REAL, "ω of heaviest weight, for the axis n^−ω"),
        Column("exponent", REAL, "averaged α(n)"),
        Column("statistical", REAL, "jackknife error"),
        Column("systematic", REAL, "spread and misfit"),
    ),
)

TABLES: Mapping[str, Table] = {
    table.name: table for table in (ORDERS, SPECTRA, FITS, BINS, PROFILES, EXPONENTS, EXTRAPOLATIONS)
}
