"""How the moments of a scalar are called: temperature has a full set, salinity and tracers a short one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class ScalarNames:
    """mean: the name of the mean; moments: output name of each kernel column ("cc", "wc", ...) that is kept; tiles: whether
    variance and vertical flux are kept on tiles."""

    mean: str
    moments: Mapping[str, str]
    tiles: bool

    def moment(self, column: str) -> str | None:
        """Output name of a kernel column, None where it is not kept."""
        return self.moments.get(column)


def scalar_names(name: str) -> ScalarNames:
    """The names for "theta", "salinity" or "tracer_<anything>"."""
    if name == "theta":
        moments = {"cc": "thetatheta", "wc": "wtheta", "uc": "utheta", "vc": "vtheta", "ccc": "thetathetatheta",
                   "ccw": "thetathetaw", "wwc": "wwtheta"}
        return ScalarNames("theta", moments, True)
    if name == "salinity":
        return ScalarNames("salinity", {"cc": "salinitysalinity", "wc": "wsalinity"}, False)
    return ScalarNames(name, {"cc": f"{name}_variance", "wc": f"w_{name}"}, False)
