"""The files of the stage: all of them, the same bytes every time, and nothing else."""

import subprocess
import sys
from pathlib import Path

import matplotlib
import pytest

from conetone.errors import TableError
from conetone.figure import files
from conetone.stages.figure import draw_figures
from conetone.sweep.paths import CLOSING_TABLES, FIGURE_FOLDER, closing_path, figure_paths
from conetone.sweep.requests import FigureRequest

from .drawing import Drawn, draw
from .tables import ANTISYMMETRIC, DIAMONDS, make_tables, write_tables


def content(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir())}


def test_every_promised_file_and_no_other(any_drawn: Drawn) -> None:
    found = {path.relative_to(any_drawn.folder) for path in any_drawn.folder.rglob("*") if path.is_file()}
    tables = {closing_path(name) for name in CLOSING_TABLES}
    assert found == {*figure_paths(any_drawn.operators), *tables}
    for path in figure_paths(any_drawn.operators):
        head = (any_drawn.folder / path).read_bytes()[:8]
        assert head.startswith(
            {".pdf": b"%PDF-", ".png": b"\x89PNG", ".csv": b"series,", ".tex": b"% Pre"}[path.suffix]
        )


def test_same_bytes_twice(single: Drawn, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Neither the date nor a reader's own settings of matplotlib show in any file."""
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "86400")
    with matplotlib.rc_context({"font.size": 30, "axes.ymargin": 0.4, "lines.antialiased": False}):
        again = draw(tmp_path, single.rows, single.operators)
    one, other = content(single.folder / FIGURE_FOLDER), content(again.folder / FIGURE_FOLDER)
    assert list(one) == list(other)
    assert [name for name in one if one[name] != other[name]] == []
    assert not [name for name, found in one.items() if b"CreationDate" in found or b"ModDate" in found]


def test_letters_stay_letters_in_the_pdf(study: Drawn) -> None:
    """Type 42 is TrueType, which publishers take; Type 3 many refuse."""
    for path in (study.folder / FIGURE_FOLDER).glob("*.pdf"):
        assert b"/Subtype /Type0" in path.read_bytes()
        assert b"/Subtype /Type3" not in path.read_bytes()


def test_a_file_is_whole_or_not_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    class Full:
        def to_csv(self, path: Path, **options: object) -> None:
            path.write_text("half a")
            raise OSError("no space left on device")

    figure = matplotlib.figure.Figure()
    with pytest.raises(OSError, match="no space"):
        files.write_figure(tmp_path / "figures" / "name", figure, Full())
    assert sorted(path.name for path in (tmp_path / "figures").iterdir()) == ["name.pdf", "name.png"]


def test_a_damaged_table_is_an_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write_tables(tmp_path, make_tables(DIAMONDS[:1]))
    path = tmp_path / "profiles.parquet"
    path.write_bytes(path.read_bytes()[:-50])
    monkeypatch.chdir(tmp_path)
    with pytest.raises(TableError, match=r"profiles\.parquet: found a damaged"):
        draw_figures(FigureRequest((ANTISYMMETRIC,)))
    assert not (tmp_path / FIGURE_FOLDER).exists()


def test_other_stages_load_no_library_of_figures() -> None:
    stages = "sprinkle, diagonalise, fit, aggregate"
    code = (
        f"import sys; from conetone.stages import {stages}; import conetone.cli;"
        "print({'matplotlib', 'seaborn', 'pandas'} & set(sys.modules))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "set()"
