"""`conetone expand`: what is said of the spectra of each size, and why."""

import json
from pathlib import Path

import pytest
import yaml

from conetone.run.expansion import print_expansion
from conetone.sweep.definition import load_sweep


@pytest.fixture
def sweep_file(tmp_path: Path) -> Path:
    fields = {
        "sweep": "mixed",
        "root_seed": 1,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 2}],
        "sizes": [100, 400, 20_000],
        "replicates": 2,
        "operators": [{"matrix": "causal", "part": "symmetric"}],
        "spectrum": {"extent": "auto", "tolerance": 1e-8},
        "windows": {"from": "0.2 * n^0.5", "to": "0.2 * n^0.75"},
    }
    path = tmp_path / "mixed.yaml"
    path.write_text(yaml.safe_dump(fields))
    return path


def test_text_has_a_line_for_each_size(sweep_file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    print_expansion(sweep_file, Path("results"), as_json=False)
    lines = capsys.readouterr().out.splitlines()
    start = lines.index(next(line for line in lines if line.startswith("Spectra")))
    shown = [line.split(maxsplit=3) for line in lines[start + 4 : start + 7]]
    spectra = load_sweep(sweep_file).spectra
    assert [words[:3] for words in shown] == [
        [str(size), each.extent, str(each.count or "all")]
        for size, each in zip((100, 400, 20_000), spectra, strict=True)
    ]
    assert [words[3].strip() for words in shown] == [each.why for each in spectra]


def test_json_has_what_text_has(sweep_file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    print_expansion(sweep_file, Path("results"), as_json=True)
    small, _, large = json.loads(capsys.readouterr().out)["spectra"]
    assert small == {
        "size": 100, "extent": "full", "count": None, "tolerance": None, "solver": "auto",
        "why": small["why"],
    }  # fmt: skip
    # 0.2 n^0.75 = 336.4, 3.3 times as many for the smooth count, in eights
    assert large == {
        "size": 20_000, "extent": "leading", "count": 1112, "tolerance": 1e-8, "solver": "auto",
        "why": large["why"],
    }  # fmt: skip
    assert "an order" in large["why"]
