"""The command line of a job: threads are for products, and change no bit."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

from conetone.operators.catalogue import SPECTRAL_PARTS
from conetone.records.files import read_rows
from conetone.stages.sprinkle import sprinkle_block
from conetone.sweep.points import EnsembleChoice, Point
from conetone.sweep.requests import DiagonaliseRequest, SprinkleRequest
from conetone.sweep.settings import SpectrumSettings

POINT = Point(EnsembleChoice("minkowski-diamond", (("dimension", 3),), "fixed"), 700)
SPECTRA = {
    "leading": SpectrumSettings("leading", 60, 1e-9, "auto"),
    "full": SpectrumSettings("full", None, None, "lapack"),
}
# One process for all: most of the time of a job goes into its imports.
JOBS = """
import sys
from pathlib import Path
from conetone.cli import diagonalise
for job in range(1, len(sys.argv), 3):
    request, output, threads = sys.argv[job : job + 3]
    diagonalise(request, Path("orders.parquet"), Path(output), int(threads))
"""


def test_spectra_have_the_same_bits_with_more_threads(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    sprinkle_block(SprinkleRequest(POINT, 1, 0, 1), Path("orders.parquet"))
    jobs: list[str] = []
    for extent, spectrum in SPECTRA.items():
        for part in SPECTRAL_PARTS:
            request = DiagonaliseRequest(POINT, "causal", part, spectrum, 0, 1).text()
            for threads in ("1", "2"):
                jobs += [request, f"{extent}-{part}-{threads}.parquet", threads]
    # a BLAS that would take two threads, however many cores there are
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "2", "OMP_NUM_THREADS": "2"}
    subprocess.run([sys.executable, "-c", JOBS, *jobs], check=True, env=environment)
    for extent in SPECTRA:
        for part in SPECTRAL_PARTS:
            (one,), (two,) = (read_rows(Path(f"{extent}-{part}-{threads}.parquet")) for threads in (1, 2))
            assert (one["status"], one["extent"], one["threads"], two["threads"]) == ("ok", extent, 1, 1)
            assert one["eigenvalues"] == two["eigenvalues"]
            assert one["residual_bound"] == two["residual_bound"]
            assert (one["residual_bound"] is None) == (extent == "full")
