"""The README keeps its word: its example sweep loads, its error message is the real one, its links exist."""

import re
from pathlib import Path

import pytest
import yaml

from conetone.errors import SweepError
from conetone.sweep.definition import load_sweep, resolve_sweep

CLONE = Path(__file__).parents[1]
TEXT = (CLONE / "README.md").read_text()


def example() -> dict:
    block = TEXT.split("## A sweep of your own\n")[1].split("\n[config/README.md]")[0]
    return yaml.safe_load(block)


def test_the_example_sweep_loads() -> None:
    sweep = resolve_sweep(example())
    assert (len(sweep.choices), len(sweep.operators)) == (3, 1)


def test_the_example_of_an_error_is_what_is_printed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    faulty = example()
    faulty["ensembles"][0]["dimension"][2] = 9
    Path("sweep.yaml").write_text(yaml.safe_dump(faulty))
    with pytest.raises(SweepError) as caught:
        load_sweep(Path("sweep.yaml"))
    assert f"conetone: {caught.value}" in TEXT


def test_everything_it_links_to_exists() -> None:
    targets = re.findall(r"\]\(([^)#]+)\)", TEXT)
    assert targets
    assert all((CLONE / target).is_file() for target in targets)
    assert all((CLONE / path).is_file() for path in re.findall(r"config/[a-z-]+\.yaml", TEXT))


def test_the_command_of_the_tests_installs_what_they_need() -> None:
    assert "pip install -e '.[test]' && .venv/bin/python -m pytest" in TEXT
