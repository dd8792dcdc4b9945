"""The numbers beside each figure are those of the tables, recomputed here plainly from the Parquet files."""

import numpy as np
import pandas as pd
import pytest

from .drawing import Drawn
from .tables import ANTISYMMETRIC, OMEGA, SYMMETRIC

OPERATORS = [ANTISYMMETRIC, SYMMETRIC]


def of_operator(table: pd.DataFrame, operator) -> pd.DataFrame:
    return table[(table.matrix == operator.matrix) & (table.part == operator.part)].reset_index(drop=True)


def layer(numbers: pd.DataFrame, name: str) -> pd.DataFrame:
    return numbers[numbers.layer == name].reset_index(drop=True)


def same(found: pd.Series, expected: pd.Series | np.ndarray) -> None:
    np.testing.assert_allclose(found.to_numpy(), np.asarray(expected), rtol=1e-12, strict=False)


@pytest.mark.parametrize("operator", OPERATORS, ids=lambda o: o.name)
def test_spectra(study: Drawn, operator) -> None:
    numbers = study.csv(f"spectra-{operator.name}")
    profiles, spectrum = of_operator(study.table("profiles"), operator), layer(numbers, "spectrum")
    assert spectrum["series"].tolist() == profiles["series"].tolist()
    same(spectrum["size"], profiles["size"])
    same(spectrum["rank"], profiles["rank"])
    same(spectrum["magnitude"], np.exp(profiles["log_magnitude"]))
    same(spectrum["magnitude_low"], np.exp(profiles["log_magnitude"] - profiles["log_magnitude_error"]))
    same(spectrum["magnitude_high"], np.exp(profiles["log_magnitude"] + profiles["log_magnitude_error"]))
    fitted = of_operator(study.table("bins"), operator).dropna(subset="fitted")
    same(layer(numbers, "fit")["rank"], fitted["rank"])
    same(layer(numbers, "fit")["magnitude"], np.exp(fitted["fitted"]))
    same(layer(numbers, "residual")["residual"], fitted["residual"])
    window = layer(numbers, "window")
    largest = fitted[fitted["size"] == 1024].groupby("series", sort=False)
    assert window["size"].tolist() == [1024] * 4
    same(window["rank"], largest["rank"].min())
    same(window["last_rank"], largest["rank"].max())


def test_windows_end_where_their_points_or_bins_do(study: Drawn, single: Drawn) -> None:
    """A smooth count is shown at the ranks of the same eigenvalues, bins with all their ranks."""
    for drawn, columns in ((study, ("rank", "rank")), (single, ("first_rank", "last_rank"))):
        for kind in ("spectra", "local-slope"):
            numbers = layer(drawn.csv(f"{kind}-causal-antisymmetric"), "window")
            bins = of_operator(drawn.table("bins"), ANTISYMMETRIC).dropna(subset="fitted")
            largest = bins[bins["size"] == 1024].groupby("series", sort=False)
            same(numbers["rank"], largest[columns[0]].min())
            same(numbers["last_rank"], largest[columns[1]].max())


@pytest.mark.parametrize("operator", OPERATORS, ids=lambda o: o.name)
def test_diagnostics(study: Drawn, operator) -> None:
    numbers = study.csv(f"diagnostics-{operator.name}")
    table = of_operator(study.table("diagnostics"), operator)
    for kind in ("smallest-size", "omega", "collapse"):
        found, wanted = layer(numbers, kind), table[table.kind == kind].reset_index(drop=True)
        assert found["series"].tolist() == wanted["series"].tolist()
        same(found["abscissa"], wanted["abscissa"])
        same(found["quality"], wanted["quality"])
        if kind != "collapse":
            same_errors(found, wanted["exponent"], wanted["statistical"], wanted["systematic"])
    exponents = of_operator(study.table("exponents"), operator)
    same_errors(
        layer(numbers, "quoted"), exponents["exponent"], exponents["statistical"], exponents["systematic"]
    )
    same_expected(numbers, "exponent", exponents)
    assert set(numbers.layer) == {"smallest-size", "omega", "collapse", "quoted", "expected"}


@pytest.mark.parametrize("operator", OPERATORS, ids=lambda o: o.name)
def test_amplitudes(study: Drawn, operator) -> None:
    """Times ρ^α, α as expected, or as measured where nothing is expected."""
    numbers = study.csv(f"amplitudes-{operator.name}")
    table = of_operator(study.table("amplitudes"), operator)
    exponents = of_operator(study.table("exponents"), operator).set_index("series")
    power = exponents["expected"].fillna(exponents["exponent"]).loc[table["series"]].to_numpy()
    factor = table["smooth_rank"].to_numpy() ** power
    found = layer(numbers, "cutoff").rename(columns={"scaled": "exponent"})
    same(found["power"], power)
    same_errors(found, table["cutoff"] * factor, table["statistical"] * factor, table["systematic"] * factor)
    known = table["law"].notna().to_numpy()
    law = layer(numbers, "law")
    same(law["scaled"], (table["law"] * factor)[known])
    assert law["standing"].tolist() == table["law_standing"][known].tolist()
    assert 0 < known.sum() < len(known)


@pytest.mark.parametrize("operator", OPERATORS, ids=lambda o: o.name)
def test_local_slope(study: Drawn, operator) -> None:
    numbers = study.csv(f"local-slope-{operator.name}")
    profiles = of_operator(study.table("profiles"), operator).dropna(subset="slope")
    slope = layer(numbers, "slope")
    same(slope["rank"], profiles["slope_rank"])
    same(slope["slope"], profiles["slope"])
    same(slope["slope_high"] - slope["slope"], profiles["slope_error"])
    same(slope["slope"] - slope["slope_low"], profiles["slope_error"])
    same_expected(numbers, "slope", of_operator(study.table("exponents"), operator))


def same_expected(numbers: pd.DataFrame, column: str, exponents: pd.DataFrame) -> None:
    known = exponents.dropna(subset="expected")
    expected = layer(numbers, "expected")
    assert expected["series"].tolist() == known["series"].tolist()
    assert expected["standing"].tolist() == known["expected_standing"].tolist()
    same(expected[column], known["expected"])


def same_errors(found: pd.DataFrame, value: pd.Series, statistical: pd.Series, systematic: pd.Series) -> None:
    total = np.sqrt(statistical**2 + systematic**2)
    same(found["exponent"], value)
    same(found["statistical_low"], value - statistical)
    same(found["statistical_high"], value + statistical)
    same(found["total_low"], value - total)
    same(found["total_high"], value + total)


@pytest.mark.parametrize("operator", OPERATORS, ids=lambda o: o.name)
def test_extrapolation(study: Drawn, operator) -> None:
    numbers = study.csv(f"extrapolation-{operator.name}")
    fits = of_operator(study.table("fits"), operator)
    averages, sizes = fits[fits.window == "average"], layer(numbers, "size")
    same_errors(sizes, averages["exponent"], averages["statistical"], averages["misfit"])
    same(sizes["abscissa"], averages["size"].to_numpy(dtype=float) ** -OMEGA)
    curve, table = layer(numbers, "curve"), of_operator(study.table("extrapolations"), operator)
    same_errors(curve, table["exponent"], table["statistical"], table["systematic"])
    same(curve["abscissa"], table["size"] ** -OMEGA)
    limit, exponents = layer(numbers, "limit"), of_operator(study.table("exponents"), operator)
    same_errors(limit, exponents["exponent"], exponents["statistical"], exponents["systematic"])
    assert (limit["abscissa"] == 0).all()
    assert np.isposinf(limit["size"]).all()
    same_expected(numbers, "exponent", exponents)


def test_exponents(study: Drawn) -> None:
    numbers, table = study.csv("exponents"), study.table("exponents")
    drawn = layer(numbers, "exponent").set_index("series")
    table = table.set_index("series").loc[drawn.index]
    assert len(drawn) == len(study.rows["exponents"])
    same_errors(drawn, table["exponent"], table["statistical"], table["systematic"])
    flat = table["dimension"].notna()
    assert (drawn["axis"] == np.where(flat, "dimension", "other")).all()
    assert (drawn["position"] - table["dimension"])[flat].abs().max() < 0.5
    # what shares a dimension stands apart
    assert not drawn.duplicated(["axis", "position"]).any()
    curve = layer(numbers, "curve")
    # d / (2 (d − 1)), fractional integration along null rays
    same(curve["exponent"], curve["position"] / (2 * (curve["position"] - 1)))
    assert (curve["position"].min(), curve["position"].max()) == (2, 3)
    exact = layer(numbers, "expected")
    assert exact[["dimension", "part", "exponent", "standing"]].to_numpy().tolist() == [
        [2, "antisymmetric", 1, "exact"],
        # the box is made up as exact too
        [2, "antisymmetric", 1, "exact"],
    ]


def test_whole_numbers_stay_whole_and_nulls_blank(study: Drawn) -> None:
    lines = (study.folder / "figures" / "spectra-causal-antisymmetric.csv").read_text().splitlines()
    header = lines[0].split(",")
    first, last = (dict(zip(header, line.split(","), strict=True)) for line in (lines[1], lines[-1]))
    assert (first["dimension"], first["size"], first["residual"]) == ("2", "256", "")
    assert (last["ensemble"], last["dimension"]) == ("kleitman-rothschild", "")
