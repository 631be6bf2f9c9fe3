"""A task: something to read, something to compute from it, and what both cost."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

#: What a task leaves behind: small named arrays.
Result = Mapping[str, np.ndarray]


@dataclass(frozen=True)
class Task:
    """One unit of work.

    key: names its result in the journal; made of all that shapes the result. label: for people, e.g. "snapshot 3, levels 0-63".
    read: called in a reading thread; compute: called with what `read` returned in a computing thread, must be pure.
    memory: bytes held from the start of `read` to the end of `compute`. bytes: bytes of the fields it takes in.
    group: tasks of one group are read one after the other, in order, by the same thread (they may hand on halo levels).
    """

    key: str
    label: str
    read: Callable[[], Any]
    compute: Callable[[Any], Result]
    memory: int
    bytes: int
    group: str = ""
