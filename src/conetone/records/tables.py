"""Every table's schema, once: columns with types, units and meaning.

To add a column: add it here, fill it in the stage that writes the table, and raise that stage's version.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pyarrow as pa

from conetone.errors import TableError
from conetone.sprinkle.catalogue import PARAMETER_NAMES

# Of the tables that each stage writes, and part of its jobs' requests: a new version makes old tables stale.
VERSIONS = {
    "sprinkle": 2,
    "diagonalise": 2,
    "fit": 4,
    "aggregate": 4,
    "figure": 3,
    "inject": 1,
    "coverage": 1,
}

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
    """A table: its name, the stage that makes its rows, and its columns, in order."""

    name: str
    stage: str
    columns: tuple[Column, ...]

    @property
    def version(self) -> int:
        """Version of the schema, with that of its stage."""
        return VERSIONS[self.stage]

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
    Column(
        "part",
        TEXT,
        "symmetric: M + Mᵀ; symmetric-positive, symmetric-negative: its eigenvalues of one sign, ranked from"
        " the spectra of symmetric; antisymmetric: i(M − Mᵀ); singular: singular values of M",
    ),
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
    "sprinkle",
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
    "diagonalise",
    (
        *REPLICATE_KEYS,
        *OPERATOR_KEYS,
        Column(
            "extent", TEXT, "full: every eigenvalue; leading: the largest of each sign, or singular values"
        ),
        Column("leading_count", COUNT, "eigenvalues of each sign asked for, null if full", nullable=True),
        Column("tolerance", REAL, "residuals allowed, relative to ‖A‖, null if full", nullable=True),
        Column(
            "eigenvalues",
            REALS,
            "eigenvalues, or singular values, ascending",
            nullable=True,
        ),
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
        Column(
            "sum_defect", REAL, "|Σ λ| / (n ‖A‖), zero in exact arithmetic; null if singular", nullable=True
        ),
        Column(
            "square_sum_defect",
            REAL,
            "|Σ λ² − 2 Σ M²| / (n ‖A‖²), if singular |Σ s² − Σ M²| / (n ‖M‖²); zero in exact arithmetic",
            nullable=True,
        ),
        Column("pairing_defect", REAL, "max |λ_i + λ_(n+1−i)| / ‖A‖, antisymmetric part only", nullable=True),
        Column("solver", TEXT, "library routine that found the eigenvalues", nullable=True),
        Column("threads", COUNT, "BLAS threads; those of products, which change no number, aside"),
        *COSTS,
        *STATUS,
    ),
)

ESTIMATOR = Column(
    "estimator", TEXT, "rank-bins: log λ averaged over bins of rank; smooth-count: cut-offs of Σ exp(−(Λ/λ)²)"
)

FITS = Table(
    "fits",
    "fit",
    (
        *SERIES_KEYS,
        Column("size", COUNT, "number of elements asked for", "elements"),
        ESTIMATOR,
        Column("window", TEXT, "rule of the window, `average` for the average over windows and models"),
        Column("model", TEXT, "model of log λ against rank, `average` for the average"),
        Column("exponent", REAL, "α of |λ_r| ∝ r^−α at this size", nullable=True),
        Column("statistical", REAL, "standard error from the scatter of replicates", nullable=True),
        Column("misfit", REAL, "further error from `scatter`, for `average` also the spread", nullable=True),
        Column("scatter", REAL, "scatter τ of log λ about the best model beyond its errors", nullable=True),
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
    "fit",
    (
        *SERIES_KEYS,
        Column("size", COUNT, "number of elements asked for", "elements"),
        ESTIMATOR,
        Column("first_rank", REAL, "smallest rank in the bin; of a smooth count, the smooth rank ρ"),
        Column("last_rank", REAL, "largest rank in the bin; of a smooth count, the smooth rank ρ"),
        Column(
            "rank",
            REAL,
            "geometric mean rank of the bin; of a smooth count, the rank ρ/Γ(1 + 1/2α) at which a pure power"
            " law has λ = Λ (α at least 1/2)",
        ),
        Column("log_magnitude", REAL, "mean of log λ over the bin, or log Λ, and the replicates"),
        Column("log_magnitude_error", REAL, "its standard error over replicates"),
        Column(
            "window", TEXT, "window of the fit in the next columns, the best of the criterion", nullable=True
        ),
        Column("model", TEXT, "its model", nullable=True),
        Column("fitted", REAL, "the fit's log λ, null outside its window", nullable=True),
        Column("residual", REAL, "(log_magnitude − fitted) / log_magnitude_error", "σ", nullable=True),
    ),
)

CUTOFFS = Table(
    "cutoffs",
    "fit",
    (
        *SERIES_KEYS,
        Column("size", COUNT, "number of elements asked for", "elements"),
        Column("smooth_rank", REAL, "smooth rank ρ: Σ exp(−(Λ/λ)²) + 1/2 over the ranked eigenvalues"),
        Column("log_cutoff", REAL, "mean over replicates of log(Λ/n)"),
        Column("copies", REALS, "that mean without each replicate in turn"),
        Column("copies_replicate", COUNTS, "the replicate that each copy leaves out"),
    ),
)

PROFILES = Table(
    "profiles",
    "fit",
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
    "aggregate",
    (
        *SERIES_KEYS,
        Column("exponent", REAL, "α at infinite size", nullable=True),
        Column(
            "statistical", REAL, "jackknife error over replicates, through the whole chain", nullable=True
        ),
        Column("systematic", REAL, "spread and misfit of windows, models and scaling forms", nullable=True),
        Column("estimator", TEXT, "estimator of the three numbers before: smooth-count or rank-bins"),
        Column("other_exponent", REAL, "α at infinite size by the other estimator", nullable=True),
        Column("other_statistical", REAL, "its jackknife error", nullable=True),
        Column("other_systematic", REAL, "its systematic error", nullable=True),
        Column(
            "other_deviation",
            REAL,
            "(other − quoted) over its error: jackknife of the difference, systematic errors in quadrature",
            "σ",
            nullable=True,
        ),
        Column("reduced_chi2", REAL, "χ²/ν of α(n) = α∞ + a n^−ω (+ b n^−ω′), weighted mean", nullable=True),
        Column("two_terms", REAL, "weight of the forms with two terms", nullable=True),
        Column(
            "scatter", REAL, "largest scatter of log λ about the best model beyond its errors", nullable=True
        ),
        Column(
            "window_weights", REALS, "weights of the windows and models of `window_models`", nullable=True
        ),
        Column("window_models", pa.list_(pa.string()), "window: model, heaviest first", nullable=True),
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
        Column("spectral_dimension", REAL, "dimension whose expected exponent this is", nullable=True),
        Column("spectral_dimension_low", REAL, "lower end of its 68 % interval", nullable=True),
        Column("spectral_dimension_high", REAL, "upper end, null if without bound", nullable=True),
        Column(
            "measured_dimension",
            REAL,
            "the same from the exponents of the flat diamonds of this sweep",
            nullable=True,
        ),
        Column("measured_dimension_low", REAL, "lower end of its 68 % interval", nullable=True),
        Column("measured_dimension_high", REAL, "upper end of its 68 % interval", nullable=True),
        Column(
            "myrheim_meyer_dimension",
            REAL,
            "dimension of the diamond with this ordering fraction, null for other regions",
            nullable=True,
        ),
        Column("myrheim_meyer_error", REAL, "its standard error", nullable=True),
        Column(
            "dimension_deviation",
            REAL,
            "spectral less Myrheim–Meyer dimension, in its error",
            "σ",
            nullable=True,
        ),
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
    "aggregate",
    (
        *SERIES_KEYS,
        Column("size", REAL, "size on the curve, ∞ at the limit", "elements"),
        Column("omega", REAL, "ω of heaviest weight, for the axis n^−ω"),
        Column("exponent", REAL, "averaged α(n)"),
        Column("statistical", REAL, "jackknife error"),
        Column("systematic", REAL, "spread and misfit"),
    ),
)

AMPLITUDES = Table(
    "amplitudes",
    "aggregate",
    (
        *SERIES_KEYS,
        Column("smooth_rank", REAL, "smooth rank ρ"),
        Column("cutoff", REAL, "Λ/n at this smooth rank and infinite size"),
        Column("statistical", REAL, "jackknife error"),
        Column("systematic", REAL, "spread over forms in 1/n and smallest sizes left out"),
        Column("slope", REAL, "coefficient of 1/n in log(Λ/n)", "elements"),
        Column("slope_statistical", REAL, "its jackknife error", "elements"),
        Column("slope_systematic", REAL, "its systematic error", "elements"),
        Column(
            "slope_expected",
            REAL,
            "−(π/α) cot(π/2α) Γ(1 + 1/α)/Γ(1 + 1/2α)² ρ, by sampling n points, to second order (derived)",
            "elements",
            nullable=True,
        ),
        Column("law", REAL, "what the amplitude law gives, smoothed alike", nullable=True),
        Column("law_standing", TEXT, "exact, published or heuristic", nullable=True),
        Column("law_source", TEXT, "where the law is from", nullable=True),
        Column("deviation", REAL, "(cutoff − law) / total error", "σ", nullable=True),
    ),
)

DIAGNOSTICS = Table(
    "diagnostics",
    "aggregate",
    (
        *SERIES_KEYS,
        Column(
            "kind",
            TEXT,
            "smallest-size: α∞ from this size on; omega: α∞ with this ω alone; collapse: quality"
            " of the collapse of local slopes against rank/n^power; sequence: noise-free extrapolation",
        ),
        Column("abscissa", REAL, "the smallest size, the ω, or the power"),
        Column("exponent", REAL, "α∞", nullable=True),
        Column("statistical", REAL, "jackknife error", nullable=True),
        Column("systematic", REAL, "spread and misfit", nullable=True),
        Column("quality", REAL, "χ²/ν of the scaling form, or Houdayer and Hartmann's S", nullable=True),
    ),
)

DIFFERENCES = Table(
    "differences",
    "aggregate",
    (
        *SERIES_KEYS,
        *(
            Column(
                f"other_{column.name}",
                column.type,
                f"{column.name} of the other series",
                nullable=column.nullable,
            )
            for column in SERIES_KEYS
        ),
        Column("difference", REAL, "exponent of the one less that of the other"),
        Column("statistical", REAL, "jackknife error; orders that both share make it small"),
        Column("systematic", REAL, "systematic errors of both in quadrature"),
        Column("deviation", REAL, "difference / total error", "σ"),
        Column("ratio", REAL, "exponent of the one over that of the other"),
        Column("ratio_statistical", REAL, "its jackknife error"),
        Column("ratio_systematic", REAL, "its systematic error"),
    ),
)

TRUTH = (
    Column("truth", TEXT, "kind of the injected spectra"),
    Column("inside", pa.bool_(), "whether one of the fitted models describes it"),
)

INJECTIONS = Table(
    "injections",
    "inject",
    (
        *SERIES_KEYS,
        *TRUTH,
        Column("injection", COUNT, "number of the injection, from 0"),
        Column("true_exponent", REAL, "exponent injected", nullable=True),
        Column("estimator", TEXT, "estimator of the next three numbers, the one whose exponents are quoted"),
        Column("exponent", REAL, "α found at infinite size", nullable=True),
        Column("statistical", REAL, "its jackknife error", nullable=True),
        Column("systematic", REAL, "its systematic error", nullable=True),
        Column("other_exponent", REAL, "α found by the other estimator", nullable=True),
        Column("other_statistical", REAL, "its jackknife error", nullable=True),
        Column("other_systematic", REAL, "its systematic error", nullable=True),
        Column("spectra", TEXT, "digest of the measured spectra"),
        *COSTS,
        *STATUS,
    ),
)

CALIBRATION = Table(
    "calibration",
    "coverage",
    (
        *SERIES_KEYS,
        Column("estimator", TEXT, "smooth-count or rank-bins"),
        Column("quoted", pa.bool_(), "whether exponents are quoted by it"),
        Column("truth", TEXT, "kind of the injected spectra; inside, outside: all of that sort together"),
        Column("inside", pa.bool_(), "whether one of the fitted models describes it"),
        Column("injections", COUNT, "injections that have an exponent"),
        Column("failed", COUNT, "injections that have none"),
        Column("coverage_68", REAL, "share of truths within one total error", nullable=True),
        Column("coverage_68_low", REAL, "lower end of its 68 % interval (Wilson)", nullable=True),
        Column("coverage_68_high", REAL, "upper end", nullable=True),
        Column("coverage_95", REAL, "share of truths within two total errors", nullable=True),
        Column("coverage_95_low", REAL, "lower end of its 68 % interval (Wilson)", nullable=True),
        Column("coverage_95_high", REAL, "upper end", nullable=True),
        Column("bias", REAL, "mean of (exponent − truth) / total error", "σ", nullable=True),
        Column("spread", REAL, "standard deviation of the same", "σ", nullable=True),
        Column("width", REAL, "mean total error", nullable=True),
        Column(
            "excess",
            REAL,
            "total errors over those that would cover 68.27 %; above 1 they are wider than need be",
            nullable=True,
        ),
        Column("pit", COUNTS, "histogram of Φ((truth − exponent) / total error), equal bins from 0 to 1"),
        Column(
            "verdict", TEXT, "kept, too narrow or wasteful against what is promised; none without a value"
        ),
        Column("reason", TEXT, "why injections failed, the first of them", nullable=True),
    ),
)

TABLES: Mapping[str, Table] = {
    table.name: table
    for table in (
        ORDERS, SPECTRA, FITS, BINS, PROFILES, CUTOFFS,
        EXPONENTS, EXTRAPOLATIONS, AMPLITUDES, DIAGNOSTICS, DIFFERENCES, INJECTIONS, CALIBRATION,
    )
}  # fmt: skip
