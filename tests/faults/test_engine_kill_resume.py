"""A run that is killed at random moments and resumed gives the same bits as one that was left alone."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

SCRIPT = Path(__file__).with_name("killable_pass.py")
KILLS = 5


def start(folder: Path) -> subprocess.Popen[str]:
    return subprocess.Popen([sys.executable, str(SCRIPT), str(folder)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def finish(folder: Path) -> tuple[int, str]:
    """(blocks found from earlier runs, digest of the results) of a run left alone."""
    process = start(folder)
    out, err = process.communicate(timeout=120)
    assert process.returncode == 0, err
    there, digest = out.split()
    return int(there), digest


def kill_when_it_has_grown(folder: Path, number: int, moment: random.Random) -> int:
    """Start a run, send it a signal soon after its journal grew; returns its exit code."""
    journal = folder / "journal"
    before = journal.stat().st_size if journal.exists() else 0
    process = start(folder)
    try:
        end = time.monotonic() + 60
        while time.monotonic() < end and process.poll() is None:
            if journal.exists() and journal.stat().st_size > before + 30:
                break
            time.sleep(0.002)
        time.sleep(moment.uniform(0.0, 0.06))
        if process.poll() is None:
            os.kill(process.pid, number)
        process.communicate(timeout=30)
    finally:
        if process.poll() is None:
            process.kill()
    return process.returncode


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> str:
    there, digest = finish(tmp_path_factory.mktemp("undisturbed"))
    assert there == 0
    return digest


def test_killed_again_and_again_it_ends_with_the_same_bits(tmp_path: Path, undisturbed: str) -> None:
    seed = random.SystemRandom().randrange(10**6)
    moment = random.Random(seed)
    codes = [kill_when_it_has_grown(tmp_path, signal.SIGKILL, moment) for _ in range(KILLS)]
    assert codes.count(-signal.SIGKILL) >= 2, (seed, codes)  # later runs may be done before the blow falls
    there, digest = finish(tmp_path)
    assert there > 0, seed
    assert digest == undisturbed, seed


def test_a_torn_record_on_top_of_a_kill(tmp_path: Path, undisturbed: str) -> None:
    kill_when_it_has_grown(tmp_path, signal.SIGKILL, random.Random(1))
    with open(tmp_path / "journal", "ab") as journal:
        journal.write(b"\x40\x00\x00\x00\x00\x00\x00\x00 half a record")
    _, digest = finish(tmp_path)
    assert digest == undisturbed


def test_an_ended_job_saves_its_work_and_says_so(tmp_path: Path, undisturbed: str) -> None:
    journal = tmp_path / "journal"
    process = start(tmp_path)
    end = time.monotonic() + 60
    while time.monotonic() < end and not (journal.exists() and journal.stat().st_size > 2000):
        time.sleep(0.002)
    process.send_signal(signal.SIGTERM)
    begun = time.monotonic()
    _, err = process.communicate(timeout=30)
    assert time.monotonic() - begun < 10
    assert "Unfinished: stopped by SIGTERM" in err
    there, digest = finish(tmp_path)
    assert there > 0
    assert digest == undisturbed
