"""Real runs of small sweeps, each in a folder of its own."""

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd
import pytest
import yaml

CONETONE = (sys.executable, "-m", "conetone")
TABLES = ("fits", "bins", "profiles", "exponents", "extrapolations")
# What differs between two runs of the same computation.
MEASURED = ["seconds", "peak_mib"]
PATIENCE = 240.0
WITNESS = Path(__file__).parent / "witness"
UP_TO_AGGREGATE = ("--", "--until", "aggregate")


@dataclass
class Study:
    """A sweep file and its results, driven from outside as a person would."""

    folder: Path
    fields: dict = field(default_factory=dict)

    @property
    def sweep_file(self) -> Path:
        path = self.folder / "sweep.yaml"
        path.write_text(yaml.safe_dump(self.fields))
        return path

    @property
    def results(self) -> Path:
        return self.folder / "results"

    @property
    def home(self) -> Path:
        return self.results / self.fields["sweep"]

    def command(self, *options: str) -> list[str]:
        return [
            *CONETONE,
            "run",
            str(self.sweep_file),
            "--results",
            str(self.results),
            "--cores",
            "2",
            *options,
        ]

    @property
    def environment(self) -> dict[str, str]:
        """Of every process: with a witness that notes each row a job computes."""
        path = os.pathsep.join(filter(None, [str(WITNESS), os.environ.get("PYTHONPATH")]))
        return {**os.environ, "PYTHONPATH": path, "TEST_HISTORY": str(self.folder / "history")}

    def history(self) -> list[str]:
        """One entry for each row that any job has computed: its table and its replicate."""
        return (self.folder / "history").read_text().splitlines()

    def run(self, *options: str) -> subprocess.CompletedProcess:
        return subprocess.run(
            self.command(*options),
            capture_output=True,
            text=True,
            timeout=PATIENCE,
            check=False,
            env=self.environment,
        )

    def run_well(self, *options: str) -> dict:
        """Run to the end; return the outcome as parsed JSON."""
        done = self.run("--json", *options)
        assert done.returncode == 0, done.stderr
        return json.loads(done.stdout)

    def compute(self, *options: str) -> dict:
        """Run to the end of aggregate: everything but the figures, which take longest in a small sweep."""
        return self.run_well(*options, *UP_TO_AGGREGATE)

    def start(self, *options: str) -> subprocess.Popen:
        # a session of its own: a signal to the process reaches nobody else, as from a scheduler
        return subprocess.Popen(
            self.command(*options),
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            start_new_session=True,
            env=self.environment,
        )

    def snakemake(self, *options: str) -> list[str]:
        snakefile = Path(__file__).parents[2] / "workflow" / "Snakefile"
        return [
            *(sys.executable, "-m", "snakemake", "--snakefile", str(snakefile)),
            *("--configfile", str(self.sweep_file), "--config", f"results={self.results}", "--cores", "2"),
            *options,
        ]

    def contents(self) -> dict[str, pd.DataFrame]:
        """Every table, without what was measured, in a fixed order of rows."""
        frames = {name: pd.read_parquet(self.home / f"{name}.parquet") for name in TABLES}
        for name in ("orders", "spectra"):
            frame = pd.read_parquet(self.home / name).drop(columns=MEASURED)
            keys = [k for k in ("point", "matrix", "part", "replicate") if k in frame]
            frames[name] = frame.sort_values(keys, ignore_index=True)
        return frames

    def rows_computed(self) -> dict[tuple, float]:
        """Every finished row so far, in place or waiting, with the seconds it took: its fingerprint."""
        found = {}
        for stage in ("orders", "spectra"):
            for path in [*self.home.glob(f"{stage}/*.parquet"), *self.home.glob(f"resume/{stage}/*.parquet")]:
                frame = pd.read_parquet(path)
                parts = frame["part"] if "part" in frame else [""] * len(frame)
                for point, part, replicate, seconds in zip(
                    frame["point"], parts, frame["replicate"], frame["seconds"], strict=True
                ):
                    found[stage, point, part, replicate] = seconds
        return found

    def stamps(self, *stages: str) -> dict[str, tuple[int, bytes]]:
        """Modification time and bytes of every table of these folders."""
        paths = [path for stage in stages for path in sorted((self.home / stage).glob("*.parquet"))]
        return {str(path): (path.stat().st_mtime_ns, path.read_bytes()) for path in paths}


def assert_equal_contents(left: Study, right: Study) -> None:
    ours, theirs = left.contents(), right.contents()
    assert ours.keys() == theirs.keys()
    for name, frame in ours.items():
        pd.testing.assert_frame_equal(frame, theirs[name], check_exact=True, obj=name)


def wait_until(condition: Callable[[], bool], process: subprocess.Popen) -> None:
    limit = time.monotonic() + PATIENCE
    while not condition():
        assert process.poll() is None, process.communicate()[1]
        assert time.monotonic() < limit, "the run never came so far"
        time.sleep(0.01)


def kill(process: subprocess.Popen, number: signal.Signals) -> str:
    """Signal the main process alone; returns what it said."""
    os.kill(process.pid, number)
    return process.communicate(timeout=60)[1]


@pytest.fixture
def study(tmp_path: Path) -> Study:
    """Seconds of work: one ensemble, three small sizes, one operator."""
    return Study(
        tmp_path,
        {
            "sweep": "small",
            "root_seed": 5,
            "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 2}],
            "sizes": [64, 90, 128],
            "replicates": 4,
            "operators": [{"matrix": "causal", "part": "antisymmetric"}],
        },
    )
