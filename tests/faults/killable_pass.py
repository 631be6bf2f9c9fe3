"""A pass over known random fields that takes its time, for `test_engine_kill_resume.py` to kill: FOLDER is its argument."""

from __future__ import annotations

import functools
import hashlib
import sys
import time
from pathlib import Path

import numpy as np
import xarray as xr

from lespost.engine.journal import Journal
from lespost.engine.run import run_tasks
from lespost.engine.settings import ComputeSettings
from lespost.engine.tasks import Task
from lespost.profiles.blocks import Block, snapshot_block
from lespost.profiles.one_pass import assemble, block_statistics
from lespost.profiles.settings import ProfilesSettings

SETTINGS = ProfilesSettings()
TIMES, LEVELS, SLAB = 8, 12, 4


def random_fields() -> xr.Dataset:
    """Eight snapshots of the same random numbers every time."""
    rng = np.random.default_rng(42)
    faces = np.linspace(-60.0, 0.0, LEVELS + 1)
    fields = {
        name: (("time", "z_face" if name == "w" else "z", "y", "x"),
               rng.standard_normal((TIMES, LEVELS + (name == "w"), 16, 16), dtype=np.float32))
        for name in ("u", "v", "w", "theta")
    }  # fmt: skip
    coordinates = {"time": 60.0 * np.arange(TIMES), "z": 0.5 * (faces[1:] + faces[:-1]), "z_face": faces,
                   "x": np.arange(16.0), "y": np.arange(16.0)}  # fmt: skip
    return xr.Dataset(fields, coordinates, {"Lx": 16.0, "Ly": 16.0})


def slow_statistics(block: Block) -> dict[str, np.ndarray]:
    """The statistics, after a moment in which to be killed."""
    time.sleep(0.03)
    return block_statistics(block)


def main(folder: Path) -> None:
    """Run or resume; print how many blocks were there already and the digest of all results."""
    fields = random_fields()
    tasks = [
        Task(f"{t}-{z0:03d}", f"snapshot {t}", functools.partial(snapshot_block, fields, t, z0, z0 + SLAB, SETTINGS),
             slow_statistics, 10**6, 1, str(t))
        for t in range(TIMES) for z0 in range(0, LEVELS, SLAB)
    ]  # fmt: skip
    with Journal(folder / "journal", {"input": "known"}) as journal:
        there = len(journal)
        run_tasks(tasks, journal, ComputeSettings(threads=2, progress="none"))
        profiles = assemble(fields, (journal.get(task.key) for task in tasks), SETTINGS)
    digest = hashlib.sha256()
    for name in sorted(profiles.variables):
        digest.update(str(name).encode() + profiles[name].values.tobytes())
    print(there, digest.hexdigest())


if __name__ == "__main__":
    main(Path(sys.argv[1]))
