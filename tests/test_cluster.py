"""Sweeps on a real Dask scheduler with two worker processes that the test starts."""

from __future__ import annotations

import os
import re
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

pytest.importorskip("distributed")

ROOT = Path(__file__).resolve().parent.parent
CASE = ROOT / "cases" / "cold-window-nacl-born.toml"


@pytest.fixture
def scheduler(tmp_path: Path) -> Iterator[str]:
    """Start a scheduler and two workers; stop them at the end."""
    path = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
    environment = {**os.environ, "PYTHONPATH": path, "OMP_NUM_THREADS": "1", "RAYON_NUM_THREADS": "1"}
    log = (tmp_path / "scheduler.log").open("wb")
    common = {"env": environment, "stderr": log, "stdout": log, "cwd": str(tmp_path)}
    dask = [sys.executable, "-m", "distributed.cli"]
    words = ["dask_scheduler", "--host", "127.0.0.1", "--port", "0", "--no-dashboard"]
    processes = [subprocess.Popen([dask[0], dask[1], f"{dask[2]}.{words[0]}", *words[1:]], **common)]
    try:
        address = ""
        deadline = time.monotonic() + 60
        while not address and time.monotonic() < deadline:
            time.sleep(0.2)
            found = re.search(r"tcp://127\.0\.0\.1:\d+", (tmp_path / "scheduler.log").read_text(errors="replace"))
            address = found.group(0) if found else ""
        assert address, (tmp_path / "scheduler.log").read_text(errors="replace")
        for _ in range(2):
            worker = [sys.executable, "-m", "distributed.cli.dask_worker", address, "--nthreads", "1", "--no-dashboard"]
            processes.append(subprocess.Popen(worker, **common))
        yield address
    finally:
        for process in reversed(processes):
            process.terminate()
        for process in processes:
            try:
                process.wait(timeout=20)
            except subprocess.TimeoutExpired:
                process.kill()
        log.close()


def test_sweep_on_a_cluster(scheduler: str, tmp_path: Path) -> None:
    words = ["sweep", str(CASE), "--parameter", "Na-Cl.n", "--values", "8,9,10", "--anharmonic", "none"]
    command = [sys.executable, "-m", "thermex", *words, "--scheduler", scheduler, "--out", str(tmp_path / "out")]
    path = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
    out = subprocess.run(
        command, capture_output=True, text=True, timeout=180, env={**os.environ, "PYTHONPATH": path}, check=False
    )
    assert out.returncode == 0, out.stderr
    assert (tmp_path / "out" / "journal.jsonl").read_text().count("\n") == 4
    assert "Closed forms" in out.stdout and "no answer" not in out.stdout


def test_no_scheduler_is_told() -> None:
    from thermex.errors import InputError
    from thermex.exploration.executor import cluster

    with pytest.raises(InputError, match="no scheduler answers"), cluster("tcp://127.0.0.1:9"):
        pass
