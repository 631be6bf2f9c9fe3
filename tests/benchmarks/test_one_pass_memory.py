"""Memory and bytes of the pass: what one more snapshot costs (nothing), what the budget means, how often bytes are read.

    python -m pytest tests/benchmarks/test_one_pass_memory.py -s
"""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from tests.benchmarks.stores import NAMES, canonical, make_store

SHAPE = (64, 128, 128)
#: Peak memory of many snapshots over that of few.
LIMIT = 1.3

RUN = """
import sys
from pathlib import Path
from lespost.engine.settings import ComputeSettings
from tests.benchmarks.stores import canonical
from tests.benchmarks.test_one_pass_ratio import whole_pass

def status(name):
    line = next(line for line in open("/proc/self/status") if line.startswith(name))
    return int(line.split()[1]) * 1024

store, folder, memory = sys.argv[1:]
fields = canonical(Path(store))
# all libraries and kernels in place before the count begins
small = fields.isel(time=slice(0, 1), x=slice(0, 8), y=slice(0, 8)).load()
whole_pass(small, Path(folder), ComputeSettings(progress="none"))
open("/proc/self/clear_refs", "w").write("5")  # the high-water mark starts again from here
before = status("VmRSS")
whole_pass(fields, Path(folder), ComputeSettings(progress="none", memory=memory))
print("peak", status("VmHWM"), "before", before)
"""


def peak(store: Path, folder: Path, memory: str) -> tuple[int, int]:
    """(peak resident memory of a pass, memory before it) in a process of its own, bytes."""
    done = subprocess.run([sys.executable, "-c", RUN, str(store), str(folder), memory], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    found = re.match(r"peak (\d+) before (\d+)", done.stdout)
    assert found is not None
    return int(found.group(1)), int(found.group(2))


def test_forty_snapshots_take_the_memory_of_four(tmp_path: Path) -> None:
    for times in (4, 40):
        make_store(tmp_path / f"{times}.zarr", SHAPE, times)
    few, base = peak(tmp_path / "4.zarr", tmp_path, "2 GB")
    many, _ = peak(tmp_path / "40.zarr", tmp_path, "2 GB")
    print(
        f"\npeak memory: 4 snapshots {few / 1e6:.0f} MB, 40 snapshots {many / 1e6:.0f} MB, ratio {many / few:.2f}; "
        f"the libraries alone {base / 1e6:.0f} MB"
    )
    assert few > base + 10e6
    assert many < LIMIT * few


@pytest.mark.parametrize("memory", ["120 MB", "400 MB"])
def test_the_budget_is_kept(tmp_path: Path, memory: str) -> None:
    """The fields are 270 MB. What the store's library holds while it decodes is in the estimate; a tenth is allowed over it."""
    make_store(tmp_path / "store.zarr", (128, 256, 256), 2, chunk_levels=8)
    highest, before = peak(tmp_path / "store.zarr", tmp_path, memory)
    print(f"\nbudget {memory}: memory grew by {(highest - before) / 1e6:.0f} MB from {before / 1e6:.0f} MB")
    assert 30e6 < highest - before < 1.1 * float(memory.split()[0]) * 1e6


def test_every_byte_is_read_once(tmp_path: Path) -> None:
    """Counted at the store itself: the compressed bytes handed out are those on disk, no chunk is asked for twice."""
    import zarr
    from zarr.storage import LocalStore

    from lespost.engine.settings import ComputeSettings
    from tests.benchmarks.test_one_pass_ratio import whole_pass

    path = tmp_path / "store.zarr"
    make_store(path, SHAPE, 3, chunk_levels=16)
    asked: dict[str, int] = {}
    handed_out = [0]
    original = LocalStore.get

    async def counting(self: LocalStore, key: str, *arguments: object, **named: object) -> object:
        found = await original(self, key, *arguments, **named)  # type: ignore[arg-type]
        if "/c/" in key and found is not None:  # a chunk of zeros, such as w at the surface, is not stored
            asked[key] = asked.get(key, 0) + 1
            handed_out[0] += len(found)
        return found

    fields = canonical(path)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(LocalStore, "get", counting)
        whole_pass(fields, tmp_path, ComputeSettings(progress="none", memory="100 MB"))
    chunks = [file for file in path.rglob("*") if file.is_file() and "/c/" in str(file)]
    assert len(asked) == len(chunks)
    assert set(asked.values()) == {1}
    assert handed_out[0] == sum(file.stat().st_size for file in chunks)
    root = zarr.open_group(path, mode="r")
    decoded = sum(int(np.prod(root[name].shape)) * 4 for name in NAMES)
    print(f"\n{len(chunks)} chunks, {handed_out[0] / 1e6:.0f} MB compressed, {decoded / 1e6:.0f} MB decoded, each read once")
