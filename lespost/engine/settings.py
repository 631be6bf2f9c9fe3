"""[compute] of a recipe: memory, threads, time limit, progress."""

from __future__ import annotations

import contextlib
import os
import re
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field

from lespost.settings import InUnit, Settings

_BYTES = {"": 1, "k": 10**3, "m": 10**6, "g": 10**9, "t": 10**12, "ki": 2**10, "mi": 2**20, "gi": 2**30, "ti": 2**40}


def read_memory(value: Any) -> int:
    """Bytes from a number of bytes or a text such as "2 GB", "500 MB", "1.5 GiB". Raises ValueError for anything else."""
    if isinstance(value, int) and not isinstance(value, bool):
        return value
    match = re.fullmatch(r"\s*(\d+(?:\.\d*)?)\s*([kKmMgGtT]?i?)B\s*", value) if isinstance(value, str) else None
    if match is None or match.group(2).lower() not in _BYTES:
        raise ValueError(f'{value!r} is not an amount of memory; write for example "2 GB" or "500 MB"')
    return round(float(match.group(1)) * _BYTES[match.group(2).lower()])


class ComputeSettings(Settings):
    """[compute]: how the work is done; nothing here changes a result."""

    memory: Annotated[int, BeforeValidator(read_memory), Field(ge=16 * 10**6)] = Field(
        2 * 10**9, description='Memory that blocks of fields may take together, e.g. "2 GB"; the program itself needs '
        "about 0.5 GB more.",
        json_schema_extra={"unit": "byte"},
    )
    threads: int = Field(0, ge=0, le=1024, description="Threads that compute; 0: one per processor that this process may use.")
    readers: int = Field(1, ge=1, le=64, description="Threads that read; more than one helps on parallel file systems only.")
    walltime: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(
        None, description="Stop in time, saved, after this long from the start; default: the end of the batch job, if any."
    )
    margin: Annotated[float, InUnit("s"), Field(ge=0)] = Field(
        60.0, description="Time kept free before the end for writing what there is."
    )
    progress: Literal["auto", "bar", "lines", "none"] = Field(
        "auto", description="A bar on a terminal and dated lines in a log (auto), or always one of them."
    )

    @property
    def thread_count(self) -> int:
        """`threads`, with 0 replaced by the number of processors this process may use."""
        if self.threads:
            return self.threads
        if hasattr(os, "sched_getaffinity"):
            return len(os.sched_getaffinity(0))
        return os.cpu_count() or 1

    @property
    def block_memory(self) -> int:
        """Bytes that one block may take at most: the whole budget, then blocks are worked on one after the other."""
        return self.memory

    def deadline(self, started: float) -> float | None:
        """Moment [s since the epoch] by which to have stopped, from `walltime` and the batch queue; None: no limit.

        started: when the process began, s since the epoch. The queue's word is SLURM_JOB_END_TIME.
        """
        limits = [] if self.walltime is None else [started + self.walltime]
        with contextlib.suppress(KeyError, ValueError):
            limits.append(float(os.environ["SLURM_JOB_END_TIME"]))
        return min(limits) - self.margin if limits else None
