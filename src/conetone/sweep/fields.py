"""The fields of a sweep file, as pydantic models: types, ranges, defaults, and what each means.

The one source of workflow/schemas/sweep.schema.json and of config/README.md. A field that takes one value
or a list is a list here; `one_or_many` makes a list of one value.
"""

from collections.abc import Iterable
from typing import Annotated, Any, Literal, get_args

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, StringConstraints, create_model
from pydantic.fields import FieldInfo

from conetone.fit.logs import Estimator
from conetone.fit.models import LOGARITHM_MODELS, MODELS, POWER_MODELS
from conetone.fit.powerlaw import Weighting
from conetone.fit.windows import GROWTH_PATTERN
from conetone.operators.catalogue import OPERATORS, PARTS
from conetone.sprinkle.catalogue import ENSEMBLES, Ensemble, Parameter
from conetone.sweep.settings import Solver

NAME_PATTERN = r"^[a-z0-9]+(-[a-z0-9]+)*$"
LONGEST_NAME = 60
LARGEST_SEED = 2**63 - 1
LARGEST_SIZE = 10_000_000
MOST_REPLICATES = 10_000_000
# Every lower end of a window is fitted with every upper end, and every exponent with every ω.
MOST_ALTERNATIVES = 20
MOST_LEADING = 10_000
# Bounds contain the rounding of a basis, 3e-11 with MOST_LEADING: what any count can reach.
TOLERANCE, SMALLEST_TOLERANCE, LARGEST_TOLERANCE = 1e-9, 1e-10, 1e-6
ALLOWED_KEY, DEFAULT_KEY = "x-allowed", "x-default"


class Fields(BaseModel):
    """A mapping of the sweep file: nothing unknown, nothing converted, no NaN."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)


def described(meaning: str, allowed: str, *, default_in_words: str = "", **constraints: Any) -> Any:
    """A field with its meaning and, for error messages and the documentation, what is allowed in words.

    `default_in_words` is for a field that depends on another and has no default of its own.
    """
    extra: dict[str, Any] = {ALLOWED_KEY: allowed}
    if default_in_words:
        extra[DEFAULT_KEY], constraints["default"] = default_in_words, None
    return Field(description=meaning, json_schema_extra=extra, **constraints)


def allowed_in_words(field: FieldInfo) -> str:
    """What a field made by `described` allows, for people."""
    extra = field.json_schema_extra
    return str(extra[ALLOWED_KEY]) if isinstance(extra, dict) else ""


def default_in_words(field: FieldInfo) -> str:
    """What stands for the default of a field that depends on another, else nothing."""
    extra = field.json_schema_extra
    return str(extra.get(DEFAULT_KEY, "")) if isinstance(extra, dict) else ""


def by_file_name(fields: type[Fields]) -> dict[str, FieldInfo]:
    """The fields of a mapping under the names they have in the file."""
    return {field.alias or name: field for name, field in fields.model_fields.items()}


def one_or_many(item: Any, most: int | None = None) -> BeforeValidator:
    """Take a single value for a list of one; both forms stand in the JSON Schema.

    The lengths a list may have are for the schema alone; give them to `described` too.
    """
    many = Annotated[list[item], Field(min_length=1, max_length=most)]
    return BeforeValidator(
        lambda value: value if isinstance(value, list) else [value], json_schema_input_type=item | many
    )


def names(options: Iterable[object], word: str = "or") -> str:
    """`a, b or c`."""
    *head, last = [str(option) for option in options]
    return f"{', '.join(head)} {word} {last}" if head else last


Size = Annotated[int, Field(ge=2, le=LARGEST_SIZE)]
Replicates = Annotated[int, Field(ge=1, le=MOST_REPLICATES)]
GrowthText = Annotated[str, StringConstraints(pattern=GROWTH_PATTERN)]
Omega = Annotated[float, Field(gt=0, le=4)]
PartName = Literal["symmetric", "symmetric-positive", "symmetric-negative", "antisymmetric", "singular"]
MatrixName = Literal["causal", "link"]
ModelName = Literal["power", "top-correction", "knee", "top-and-knee", "logarithm", "logarithm-and-knee"]
ExtentName = Literal["full", "leading", "auto"]
assert get_args(PartName) == PARTS
assert get_args(MatrixName) == tuple(OPERATORS)
assert get_args(ModelName) == tuple(MODELS)


def _ensemble_fields(ensemble: Ensemble) -> type[Fields]:
    fields: dict[str, Any] = {
        "ensemble": (Literal[ensemble.name], described("name of the ensemble", ensemble.name)),
    }
    for parameter in ensemble.parameters:
        fields[parameter.name] = _parameter_field(parameter)
    return create_model(
        "".join(word.capitalize() for word in ensemble.name.split("-")),
        __base__=Fields,
        __doc__=f"{ensemble.meaning} ({ensemble.source})",
        **fields,
    )


def _parameter_field(parameter: Parameter) -> tuple[Any, Any]:
    item = Annotated[int, Field(ge=parameter.minimum, le=parameter.maximum)]
    kind = Annotated[list[item], one_or_many(item)]
    allowed = (
        f"a whole number from {parameter.minimum} to {parameter.maximum}, or a list of them: one series each"
    )
    return kind, described(parameter.meaning, allowed, min_length=1)


ENSEMBLE_FIELDS: dict[str, type[Fields]] = {name: _ensemble_fields(e) for name, e in ENSEMBLES.items()}
EnsembleFields: Any = ENSEMBLE_FIELDS["minkowski-diamond"]
for _model in list(ENSEMBLE_FIELDS.values())[1:]:
    EnsembleFields = EnsembleFields | _model


class OperatorFields(Fields):
    """One matrix of the order, and the parts of it whose spectra are taken: a series each.

    `symmetric` and its two signs share one spectrum, which is computed once.
    """

    matrix: MatrixName = described(
        "; ".join(f"`{operator.name}` ({operator.meaning})" for operator in OPERATORS.values()),
        names(OPERATORS),
    )
    part: Annotated[list[PartName], one_or_many(PartName)] = described(
        "of a matrix M, `symmetric`: M + Mᵀ, magnitudes of both signs; `symmetric-positive` and"
        " `symmetric-negative`: of one sign; `antisymmetric`: i(M − Mᵀ), whose signs are alike;"
        " `singular`: singular values of M",
        f"{names(PARTS)}, or a list of them",
        min_length=1,
    )


def _in_yaml(number: float) -> str:
    return f"{number:.1e}".replace("e-0", "e-")


class SpectrumFields(Fields):
    """Which eigenvalues are computed."""

    extent: ExtentName = described(
        "`full`: every eigenvalue; `leading`: the largest of each sign, without a dense matrix;"
        " `auto`: at each size whichever is forecast to be quicker, if the windows allow it",
        names(get_args(ExtentName)),
        default="full",
    )
    count: int = described(
        "with `leading` or `auto`: eigenvalues of each sign, and singular values",
        f"a whole number from 1 to {MOST_LEADING}",
        ge=1,
        le=MOST_LEADING,
        default_in_words="with `leading` required; with `auto` what the windows and their smooth counts take",
    )
    tolerance: float = described(
        "with `leading` or `auto`: largest residual of an eigenvalue, relative to the largest eigenvalue",
        f"a number from {_in_yaml(SMALLEST_TOLERANCE)} to {_in_yaml(LARGEST_TOLERANCE)}",
        ge=SMALLEST_TOLERANCE,
        le=LARGEST_TOLERANCE,
        default_in_words=f"with `leading` and `auto` {_in_yaml(TOLERANCE)}",
    )
    solver: Solver = described(
        "of full spectra: `two-stage` (ours, through band form; not for singular values); `lapack`, as a"
        " check of it; `auto`: the quicker at each size",
        names(get_args(Solver)),
        default="auto",
    )


def _growth_allowed(example: str) -> str:
    growth = f"`c * n^b` with c > 0 and 0 < b ≤ 1, such as {example}"
    return f"{growth}, or a list of up to {MOST_ALTERNATIVES} of them"


class WindowFields(Fields):
    """The grid of fit windows, every `from` with every `to`, and what is fitted in them.

    Both ends grow with the size n, so that a window means the same at every size.
    """

    model_config = ConfigDict(validate_by_name=False, validate_by_alias=True)

    from_: Annotated[list[GrowthText], one_or_many(GrowthText, MOST_ALTERNATIVES)] = described(
        "lower ends", _growth_allowed("0.5 * n^0.33"),
        min_length=1, max_length=MOST_ALTERNATIVES, alias="from", default=["0.5 * n^0.33", "0.7 * n^0.33"],
    )  # fmt: skip
    to: Annotated[list[GrowthText], one_or_many(GrowthText, MOST_ALTERNATIVES)] = described(
        "upper ends, exclusive", _growth_allowed("0.5 * n^0.5"),
        min_length=1, max_length=MOST_ALTERNATIVES, default=["0.5 * n^0.5", "0.7 * n^0.5"],
    )  # fmt: skip
    smallest_rank: int = described(
        "no window begins below this rank", "a whole number from 1 to 1000", ge=1, le=1000, default=2
    )
    bins: int = described(
        "log-spaced rank bins, or smooth ranks, over all windows together",
        "a whole number from 4 to 100",
        ge=4,
        le=100,
        default=12,
    )
    models: Annotated[list[ModelName], one_or_many(ModelName)] = described(
        "; ".join(f"`{model.name}`: {model.meaning}" for model in MODELS.values()),
        f"{names(MODELS)}, or a list of them", min_length=1,
        default_in_words=f"{names(POWER_MODELS, 'and')}; {names(LOGARITHM_MODELS, 'and')} for series"
        " whose law is known to hold a logarithm",
    )  # fmt: skip
    estimator: Estimator = described(
        "whose exponent is quoted; the other stands beside it. `smooth-count`: fits cut-offs Λ against the"
        " smooth count Σ exp(−(Λ/λ)²), which smooths the steps of multiplets away; `rank-bins`: fits log λ"
        " averaged over bins of rank",
        names(get_args(Estimator)),
        default="smooth-count",
    )
    weights: Weighting = described(
        "`diagonal`: points weigh by their standard errors; `correlated`: also by their correlations, shrunk"
        " after Ledoit and Wolf and estimated again without each replicate",
        names(get_args(Weighting)),
        default="diagonal",
    )


class ExtrapolationFields(Fields):
    """α(n) = α∞ + a n^−ω, and with two terms, averaged over ω and the number of smallest sizes left out."""

    omegas: Annotated[list[Omega], one_or_many(Omega, MOST_ALTERNATIVES)] = described(
        "the set of ω averaged over",
        f"a number above 0 and up to 4, or a list of up to {MOST_ALTERNATIVES} of them",
        min_length=1, max_length=MOST_ALTERNATIVES, default=[0.5, 0.75, 1.0],
    )  # fmt: skip
    most_sizes_cut: int = described(
        "leave out none, one, … up to this many of the smallest sizes (three stay, with two terms four)",
        "a whole number from 0 to 20", ge=0, le=20, default=2,
    )  # fmt: skip


class SweepFields(Fields):
    """A sweep: one study."""

    sweep: Annotated[str, StringConstraints(pattern=NAME_PATTERN, max_length=LONGEST_NAME)] = described(
        "name of the sweep; its results stand in a folder of this name",
        f"small letters, digits and single hyphens between them, at most {LONGEST_NAME} characters",
    )
    root_seed: int = described(
        "all random streams derive from it", f"a whole number from 0 to {LARGEST_SEED}", ge=0, le=LARGEST_SEED
    )
    ensembles: list[Annotated[EnsembleFields, Field(discriminator="ensemble")]] = described(
        "the ensembles, each with its parameters; a list of values gives one series each",
        "a list of at least one ensemble", min_length=1,
    )  # fmt: skip
    sizes: Annotated[list[Size], one_or_many(Size)] = described(
        "numbers of elements, rising, best in equal ratios; at least three to extrapolate, five to publish",
        f"rising whole numbers from 2 to {LARGEST_SIZE}, best in equal ratios",
        min_length=1,
    )
    replicates: Annotated[list[Replicates], one_or_many(Replicates)] = described(
        "orders per point: one number for all sizes, or a list with one for each size",
        f"a whole number from 1 to {MOST_REPLICATES}, or a list with one for each size",
        min_length=1,
    )
    count: Literal["fixed", "poisson"] = described(
        "`fixed`: every order has `size` elements; `poisson`: a Poisson number with that mean",
        "fixed or poisson", default="fixed",
    )  # fmt: skip
    operators: list[OperatorFields] = described(
        "the matrices and parts whose spectra are taken", "a list of at least one operator", min_length=1
    )
    spectrum: SpectrumFields = described("which eigenvalues", "a mapping", default=SpectrumFields())
    windows: WindowFields = described("fit windows and models", "a mapping", default=WindowFields())
    extrapolation: ExtrapolationFields = described(
        "finite-size scaling", "a mapping", default=ExtrapolationFields()
    )


# The model of every mapping inside a sweep but the ensembles, which have one model each.
INNER_FIELDS: dict[str, type[Fields]] = {
    "operators": OperatorFields,
    "spectrum": SpectrumFields,
    "windows": WindowFields,
    "extrapolation": ExtrapolationFields,
}
