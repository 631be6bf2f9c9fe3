"""How the whole moment pass compares with merely decoding the store, measured side by side in this process.

    python -m pytest tests/benchmarks/test_one_pass_ratio.py -s          two snapshots of 256 x 256 x 128
    python -m tests.benchmarks.test_one_pass_ratio 512 512 256 1         another size

The runs are interleaved and medians compared, so that a busy machine slows both alike.
"""

from __future__ import annotations

import functools
import os
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import xarray as xr
import zarr

from lespost.engine.journal import Journal
from lespost.engine.run import run_tasks
from lespost.engine.settings import ComputeSettings
from lespost.engine.tasks import Task
from lespost.profiles.blocks import Block, BlockPlan, SlabReader, plan_blocks, snapshot_block
from lespost.profiles.layout import layout_of
from lespost.profiles.one_pass import assemble, block_statistics
from lespost.profiles.settings import ProfilesSettings
from tests.benchmarks.stores import NAMES, canonical, make_store

#: The pass may take at most this many times as long as decoding.
LIMIT = 1.2


def tasks_of(fields: xr.Dataset, settings: ProfilesSettings, compute: ComputeSettings) -> list[Task]:
    """The tasks of the pass, as the pipeline makes them."""
    layout = layout_of(fields)
    plans = plan_blocks(fields, settings, compute.block_memory, layout=layout)
    readers = {plan.time_index: SlabReader(fields, layout, plan.time_index) for plan in plans}

    def read(plan: BlockPlan) -> Block:
        return snapshot_block(fields, plan.time_index, plan.z0, plan.z1, settings, layout, readers[plan.time_index])

    return [
        Task(plan.key, plan.label, functools.partial(read, plan), block_statistics, plan.memory, plan.bytes, plan.group)
        for plan in plans
    ]


def whole_pass(
    fields: xr.Dataset, folder: Path, compute: ComputeSettings, settings: ProfilesSettings | None = None
) -> xr.Dataset:
    """The pass through the engine and its journal to the assembled dataset."""
    settings = ProfilesSettings() if settings is None else settings
    path = folder / "journal"
    path.unlink(missing_ok=True)
    with Journal(path, {"input": "benchmark"}) as journal:
        tasks = tasks_of(fields, settings, compute)
        run_tasks(tasks, journal, compute)
        return assemble(fields, (journal.get(task.key) for task in tasks), settings)


def decode(path: Path) -> None:
    """Every field of every snapshot into memory, and nothing else."""
    root = zarr.open_group(path, mode="r")
    for t in range(root["u"].shape[0]):
        for name in NAMES:
            root[name][t]


def medians(repeats: int, **runs: Callable[[], object]) -> dict[str, float]:
    """Median seconds of each run, and of its processor time as `name_processor`; the runs take turns."""
    seconds: dict[str, list[float]] = {}
    for _ in range(repeats):
        for name, run in runs.items():
            start, processor = time.perf_counter(), time.process_time()
            run()
            seconds.setdefault(name, []).append(time.perf_counter() - start)
            seconds.setdefault(f"{name}_processor", []).append(time.process_time() - processor)
    return {name: float(np.median(values)) for name, values in seconds.items()}


def measure(shape: tuple[int, int, int], times: int, folder: Path, repeats: int = 9) -> dict[str, float]:
    """Median seconds of decoding and of the whole pass, and their ratio."""
    store = folder / "store.zarr"
    fields = make_store(store, shape, times)
    fields = canonical(store)
    compute = ComputeSettings(progress="none")
    decode(store)
    whole_pass(fields, folder, compute)
    blocks = [snapshot_block(fields, 0, 0, shape[0], ProfilesSettings())]
    found = medians(
        repeats, decode=lambda: decode(store), whole=lambda: whole_pass(fields, folder, compute),
        kernels=lambda: block_statistics(blocks[0]),
    )  # fmt: skip
    found["ratio"] = found["whole"] / found["decode"]
    found["processor_ratio"] = found["whole_processor"] / found["decode_processor"]
    return found


def report(shape: tuple[int, int, int], times: int, found: dict[str, float]) -> str:
    """One line."""
    nz, ny, nx = shape
    return (
        f"{nx} x {ny} x {nz}, {times} snapshots: decode {found['decode'] * 1e3:.0f} ms, whole pass "
        f"{found['whole'] * 1e3:.0f} ms, ratio {found['ratio']:.2f} (processor time {found['processor_ratio']:.2f}); "
        f"kernels alone {found['kernels'] * 1e3:.0f} ms a snapshot (one thread); load {os.getloadavg()[0]:.1f}"
    )


def test_the_pass_costs_little_more_than_decoding(tmp_path: Path) -> None:
    # Eight snapshots: in a run of two, the first read and the last sums overlap with nothing and weigh a quarter of it.
    found = measure((128, 256, 256), 8, tmp_path)
    print("\n" + report((128, 256, 256), 8, found))
    assert found["ratio"] <= LIMIT


if __name__ == "__main__":
    nx, ny, nz, times = (int(word) for word in sys.argv[1:5]) if len(sys.argv) > 4 else (256, 256, 128, 8)
    with tempfile.TemporaryDirectory() as name:
        print(report((nz, ny, nx), times, measure((nz, ny, nx), times, Path(name))))

