"""What must be said wherever a deployment is designed."""

from __future__ import annotations

#: Shown on the page and by the commands whenever a virtual instrument stands for gear that could be put to sea.
PLANNING_CAUTION = (
    "A virtual deployment says what an instrument would record, not how to put one to sea. Gear in the water can injure people "
    "and foul ships and fishing gear: site, lights and notices to mariners follow local rules; mooring loads, releases and deck "
    "work belong to licensed practice."
)
