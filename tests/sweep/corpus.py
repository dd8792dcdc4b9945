"""The corpus of valid and invalid sweep files, and sweeps with random damage."""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hypothesis import strategies as st

from conetone.fit.models import MODELS
from conetone.fit.size import ESTIMATORS
from conetone.operators.catalogue import PARTS

CLONE = Path(__file__).parents[2]
VALID = sorted((CLONE / "tests/sweeps/valid").glob("*.yaml"))
INVALID = sorted((CLONE / "tests/sweeps/invalid").glob("*.yaml"))


@dataclass(frozen=True)
class Expected:
    """What the first line of an invalid file says: `# expected: place | found | allowed[ | schema]`.

    `found` and `allowed` are parts of the message; `schema` marks faults that the JSON Schema sees too.
    """

    place: str
    found: str
    allowed: str
    schema: bool


def expectation(path: Path) -> Expected:
    """The expectation of an invalid file, whose other lines may be no text at all."""
    first, _, _ = path.read_bytes().partition(b"\n")
    head, separator, rest = first.decode().partition("# expected: ")
    assert separator, path
    assert not head, path
    place, found, allowed, *flags = rest.split(" | ")
    assert flags in ([], ["schema"]), path
    return Expected(place, found, allowed, bool(flags))


def complete_sweep() -> dict[str, Any]:
    """A fresh sweep with every field, in which every list has more than one entry."""
    return {
        "sweep": "damaged",
        "root_seed": 1,
        "ensembles": [
            {"ensemble": "minkowski-diamond", "dimension": [2, 3]},
            {"ensemble": "minkowski-box", "dimension": 4},
            {"ensemble": "kleitman-rothschild"},
        ],
        "sizes": [64, 128, 256],
        "replicates": [8, 4, 2],
        "count": "poisson",
        "operators": [
            {"matrix": "causal", "part": ["symmetric", "antisymmetric"]},
            {"matrix": "link", "part": ["symmetric-positive", "symmetric"]},
        ],
        "spectrum": {"extent": "auto", "count": 40, "tolerance": 1e-8, "solver": "two-stage"},
        "windows": {
            "from": ["n^0.25", "0.5 * n^0.5"],
            "to": ["n^0.75", "0.25 * n^1"],
            "smallest_rank": 2,
            "bins": 10,
            "models": ["power", "top-correction"],
            "estimator": "rank-bins",
            "weights": "correlated",
        },
        "extrapolation": {"omegas": [0.5, 1.0], "most_sizes_cut": 1},
    }


SCALARS = (
    st.none()
    | st.booleans()
    | st.integers(-5, 300)
    | st.integers()
    | st.floats()
    | st.text(max_size=12)
    | st.sampled_from(
        ["", "symmetric", "symmetric-negative", "singular", "link",
         "fixed", "full", "power", "logarithm", "knee", "smooth-count", "diagonal", "minkowski-box",
         "n^0.5", "2 * n^1", "1e-3",
         "../x", "64", -1, 0, 1, 2, 3, 64, 0.5, 1.0, 10**7, 10**400,
         "\ud800", "a\nb", "9" * 400 + " * n^0.5"]
    )
)  # fmt: skip
JUNK = st.recursive(
    SCALARS,
    lambda inner: (
        st.lists(inner, max_size=4)
        | st.dictionaries(
            st.text(max_size=6) | st.sampled_from(["ensemble", "from", "part"]), inner, max_size=3
        )
        | st.dictionaries(st.integers() | st.none() | st.just((1, 2)) | st.just("\ud800"), inner, max_size=2)
    ),
    max_leaves=6,
)


def _containers(values: Any) -> list[Any]:
    inner = values.values() if isinstance(values, dict) else values if isinstance(values, list) else []
    below = [container for value in inner for container in _containers(value)]
    return [values, *below] if isinstance(values, dict | list) and values else below


@st.composite
def damaged_sweeps(draw: st.DrawFn) -> dict[Any, Any]:
    """A complete sweep after one to three of: a value replaced by junk or a kindred value, dropped, added."""
    values: dict[Any, Any] = complete_sweep()
    for _ in range(draw(st.integers(1, 3))):
        containers = _containers(values)
        if not containers:
            break
        container = draw(st.sampled_from(containers))
        keys = list(container) if isinstance(container, dict) else list(range(len(container)))
        key = draw(st.sampled_from(keys))
        deed = draw(st.sampled_from(["replace", "drop", "add", "repeat", "unwrap"]))
        if deed == "replace":
            container[key] = draw(JUNK)
        elif deed == "drop":
            del container[key]
        elif deed == "unwrap" and isinstance(container[key], list) and container[key]:
            container[key] = draw(st.sampled_from(container[key]))
        elif isinstance(container, dict):
            container[draw(st.text(max_size=8))] = draw(JUNK)
        else:
            container.insert(key, container[key] if deed == "repeat" else draw(JUNK))
    return values


def _one_or_many(items: st.SearchStrategy[Any], most: int = 4) -> st.SearchStrategy[Any]:
    return items | st.lists(items, min_size=1, max_size=most, unique=True)


_DIMENSIONAL = st.fixed_dictionaries(
    {
        "ensemble": st.sampled_from(["minkowski-diamond", "minkowski-box"]),
        "dimension": _one_or_many(st.integers(2, 7)),
    }
)
_LOWER_ENDS = st.sampled_from(["n^0.25", "1.5 * n^0.25", "0.25 * n^0.5", "0.4 * n^0.50"])
_UPPER_ENDS = st.sampled_from(["0.25 * n^0.75", "n^0.75", "0.5 * n^0.8", "0.125 * n^1"])


_COUNTS, _TOLERANCES = st.integers(1, 400), st.floats(1e-10, 1e-6)
_SOLVERS = st.sampled_from(["auto", "two-stage", "lapack"])
_SPECTRA = (
    st.fixed_dictionaries({}, optional={"extent": st.just("full"), "solver": _SOLVERS})
    | st.fixed_dictionaries(
        {"extent": st.just("leading"), "count": _COUNTS}, optional={"tolerance": _TOLERANCES}
    )
    | st.fixed_dictionaries(
        {"extent": st.just("auto")},
        optional={"count": _COUNTS, "tolerance": _TOLERANCES, "solver": _SOLVERS},
    )
)


@st.composite
def varied_sweeps(draw: st.DrawFn) -> dict[str, Any]:
    """Sweeps whose fields are all within their ranges; about half are valid as a whole."""
    sizes = draw(st.integers(64, 3000) | st.sets(st.integers(64, 3000), min_size=1, max_size=5).map(sorted))
    per_size = st.just(1) if isinstance(sizes, int) else st.just(len(sizes))
    return draw(
        st.fixed_dictionaries(
            {
                "sweep": st.from_regex(r"[a-z0-9]{1,9}(-[a-z0-9]{1,9}){0,4}", fullmatch=True),
                "root_seed": st.integers(0, 2**63 - 1),
                "ensembles": st.lists(
                    _DIMENSIONAL | st.just({"ensemble": "kleitman-rothschild"}), min_size=1, max_size=2
                ),
                "sizes": st.just(sizes),
                "replicates": st.integers(1, 10**7)
                | per_size.flatmap(lambda n: st.lists(st.integers(1, 10**7), min_size=n, max_size=n)),
                "operators": st.lists(
                    st.fixed_dictionaries(
                        {
                            "matrix": st.sampled_from(["causal", "link"]),
                            "part": _one_or_many(st.sampled_from(PARTS), len(PARTS)),
                        }
                    ),
                    min_size=1,
                    max_size=2,
                ),
            },
            optional={
                "count": st.sampled_from(["fixed", "poisson"]),
                "spectrum": _SPECTRA,
                "windows": st.fixed_dictionaries(
                    {},
                    optional={
                        "from": _one_or_many(_LOWER_ENDS),
                        "to": _one_or_many(_UPPER_ENDS),
                        "smallest_rank": st.integers(1, 5),
                        "bins": st.integers(4, 100),
                        "models": _one_or_many(st.sampled_from(sorted(MODELS)), len(MODELS)),
                        "estimator": st.sampled_from(ESTIMATORS),
                        "weights": st.sampled_from(["diagonal", "correlated"]),
                    },
                ),
                "extrapolation": st.fixed_dictionaries(
                    {},
                    optional={
                        "omegas": _one_or_many(st.floats(0.01, 4) | st.integers(1, 4)),
                        "most_sizes_cut": st.integers(0, 20),
                    },
                ),
            },
        )
    )
