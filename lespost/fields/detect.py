"""Deciding an arrangement by continuity: candidates are scored on a sample, and the best must win clearly.

What recipe or metadata fix is a pin; the rest is open. A pin that the flow plainly contradicts is refused, an open choice
without a clear winner is refused as well, with the candidates and the recipe lines that would settle it.
The scoring itself is `lespost.fields.continuity`; putting the answer to use is `lespost.fields.layout`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from lespost.errors import LayoutError
from lespost.fields.axes import Role
from lespost.fields.continuity import Horizontal, Score, WOffset
from lespost.findings import Decision, Finding

#: A winner must beat every different arrangement by this factor ...
MARGIN = 3.0
#: ... and be below this residual, unless it is at round-off.
CREDIBLE = 0.3
#: Multiple of the rounding error that still counts as round-off, and the least residual that the sums can resolve.
ROUNDOFF_FACTOR, ROUNDOFF_FLOOR = 5.0, 1e-7


@dataclass(frozen=True)
class Candidate:
    """roles: of the three axes in space of u, in file order. score: its continuity."""

    roles: tuple[Role, ...]
    score: Score

    @property
    def arrangement(self) -> tuple[object, ...]:
        """What must not stay open: order of axes, direction of z, place of w."""
        return self.roles, self.score.z_sign, self.score.w_offset

    def keys(self) -> dict[str, str]:
        """The recipe keys of this arrangement, as TOML values."""
        s = self.score
        axes = ", ".join(f'"{role}"' for role in ("time", *self.roles))
        found = {
            "axes": f"[{axes}]",
            "surface": '"last"' if s.z_sign > 0 else '"first"',
            "w_position": f'"{w_position(s.w_offset, s.z_sign)}"',
        }
        if s.scheme == "staggered":
            found |= {"u_position": f'"{s.u_position}"', "v_position": f'"{s.v_position}"'}
        return found | {"horizontal_scheme": f'"{s.scheme}"'}

    def words(self, only: frozenset[str] | None = None) -> str:
        """The recipe line of this arrangement (of the keys in `only`) and its residual."""
        line = ", ".join(f"{key} = {value}" for key, value in self.keys().items() if only is None or key in only)
        return f"{line} (residual {self.score.residual:.2g})" if math.isfinite(self.score.residual) else line


@dataclass(frozen=True)
class Pins:
    """What is already fixed; None or empty: open. how: where the pins come from, for messages."""

    roles: tuple[Role, ...] | None = None
    z_sign: int | None = None
    w_offsets: frozenset[WOffset] = frozenset()
    w_position: str | None = None
    u_position: Horizontal | None = None
    v_position: Horizontal | None = None
    scheme: str | None = None

    def allow(self, candidate: Candidate) -> bool:
        """Whether `candidate` agrees with every pin."""
        s = candidate.score
        return (
            self.roles in (None, candidate.roles)
            and self.z_sign in (None, s.z_sign)
            and (not self.w_offsets or s.w_offset in self.w_offsets)
            and (self.w_position is None or w_position(s.w_offset, s.z_sign) == self.w_position)
            and self.u_position in (None, s.u_position)
            and self.v_position in (None, s.v_position)
            and self.scheme in (None, s.scheme)
        )


@dataclass(frozen=True)
class Verdict:
    """The chosen arrangement. margin: residual of the best different arrangement / its own (inf if there is none).

    evidence: of the arrangement; scheme_evidence: of the horizontal scheme and the places of u and v within it.
    """

    candidate: Candidate
    margin: float
    evidence: str
    scheme_evidence: str
    findings: tuple[Finding, ...]

    def decision(self, subject: str, choice: str, pinned: bool, pin_text: str, scheme: bool = False) -> Decision:
        """A Decision that quotes continuity, or the pin where there was one."""
        evidence = self.scheme_evidence if scheme else self.evidence
        if pinned:
            return Decision(subject, choice, "metadata", f"{pin_text}; {evidence}")
        return Decision(subject, choice, "detected", evidence)


def w_position(offset: WOffset, z_sign: int) -> str:
    """The recipe's word for an offset in index space."""
    if offset == "centre":
        return "centre"
    if offset in ("faces", "interior"):
        return "faces" if offset == "faces" else "interior_faces"
    lower = (offset == "low") == (z_sign > 0)
    return "faces_without_surface" if lower else "faces_without_bottom"


def _effective(score: Score) -> float:
    """The residual, not below what rounding can tell."""
    return max(score.residual, ROUNDOFF_FACTOR * score.roundoff, ROUNDOFF_FLOOR)


def at_roundoff(score: Score) -> bool:
    """Whether rounding alone explains the residual."""
    return score.residual <= max(ROUNDOFF_FACTOR * score.roundoff, ROUNDOFF_FLOOR)


def choose(candidates: Sequence[Candidate], pins: Pins, where: str) -> Verdict:
    """The arrangement of `candidates` that continuity and the pins allow.

    Raises LayoutError where a pin is contradicted, where nothing fits the pins, or where no clear winner exists.
    """
    allowed = [c for c in candidates if pins.allow(c)]
    if not allowed:
        raise LayoutError(
            f"{where}: no arrangement fits what recipe and metadata say together ({_pins_text(pins)}); correct [fields] "
            "w_position, surface, u_position, v_position or horizontal_scheme."
        )
    rated = [c for c in candidates if math.isfinite(c.score.residual)]
    open_choices = {c.arrangement for c in allowed}
    if not rated:
        if len(open_choices) > 1:
            raise LayoutError(
                f"{where}: the sampled flow is at rest, so continuity cannot decide {' and '.join(sorted(_open_keys(allowed)))}. "
                f"Write them into [fields], for example {allowed[0].words(_open_keys(allowed))}."
            )
        first = allowed[0]
        note = Finding("divergence", "warning", "the sampled flow is at rest; the layout could not be checked by continuity.")
        text = "flow at rest: not checked by continuity"
        return Verdict(first, math.inf, text, text, (note,))
    allowed = [c for c in allowed if math.isfinite(c.score.residual)]
    best = _best(allowed)
    rival = min(rated, key=lambda c: c.score.residual)
    if rival.arrangement not in open_choices and rival.score.residual < 0.1:
        contradicted = MARGIN * _effective(rival.score) < _effective(best.score) and best.score.residual > 0.02
        if contradicted:
            raise LayoutError(
                f"{where}: the flow is not solenoidal as recipe and metadata lay it out ({best.words()}), but it is as "
                f"{rival.words()}. Either a label is wrong (axes, direction of z, place of w, u and v exchanged) or "
                "[fields] must say so: write the second line if it is right."
            )
    others = [c for c in allowed if c.arrangement != best.arrangement]
    nearest = min(others, key=lambda c: c.score.residual) if others else None
    every = [c for c in rated if c.arrangement != best.arrangement]
    runner = min(every, key=lambda c: c.score.residual) if every else None
    margin = _effective(runner.score) / _effective(best.score) if runner else math.inf
    if nearest is not None:
        clear = _effective(nearest.score) / _effective(best.score)
        if clear < MARGIN or not (at_roundoff(best.score) or best.score.residual < CREDIBLE):
            raise LayoutError(
                f"{where}: the layout cannot be decided. Continuity on a sample leaves {_listed([best, *_ranked(others)])}. "
                "Write the right one of these lines into [fields]."
            )
    evidence = (
        f"continuity: rms divergence {best.score.residual:.2g} of its terms (rounding alone: {best.score.roundoff:.1g})"
    )
    if runner is not None:
        evidence += f", next best arrangement {runner.score.residual:.2g}, {margin:.3g} times more"
    scheme_evidence, findings = _scheme(best, rated)
    if not at_roundoff(best.score):
        severity = "warning" if best.score.residual > 0.05 else "note"
        findings += (Finding(
            "divergence", severity,  # type: ignore[arg-type]
            f"the rms divergence is {best.score.residual:.2g} of its terms where rounding alone would leave "
            f"{best.score.roundoff:.1g}: the files hold interpolated, filtered or differently differenced velocities.",
            best.score.residual, ROUNDOFF_FACTOR * best.score.roundoff, "1",
        ),)  # fmt: skip
    return Verdict(best, margin, evidence, scheme_evidence, findings)


def _scheme(best: Candidate, rated: list[Candidate]) -> tuple[str, tuple[Finding, ...]]:
    """How clearly the horizontal scheme (with the places of u and v) wins over the others of the same arrangement."""

    def soft(candidate: Candidate) -> tuple[str, str, str]:
        return candidate.score.scheme, candidate.score.u_position, candidate.score.v_position

    own = f"continuity: rms divergence {best.score.residual:.2g} of its terms"
    others = [c for c in rated if c.arrangement == best.arrangement and soft(c) != soft(best)]
    if not others:
        return own, ()
    second = min(others, key=lambda c: c.score.residual)
    margin = _effective(second.score) / _effective(best.score)
    name: str = second.score.scheme
    if name == "staggered":
        name += f", u {second.score.u_position}, v {second.score.v_position}"
    text = f"{own}, next best scheme ({name}) {second.score.residual:.2g}, {margin:.3g} times more"
    if margin >= MARGIN:
        return text, ()
    return text, (Finding(
        "scheme-open", "note",
        f"the horizontal scheme and the places of u and v are not clear ({best.score.scheme}: {best.score.residual:.2g}, {name}: "
        f"{second.score.residual:.2g}); {best.score.scheme} is used. If it is known, write [fields].horizontal_scheme.",
        margin, MARGIN, "1",
    ),)  # fmt: skip


def _best(allowed: list[Candidate]) -> Candidate:
    """The smallest residual; among those that rounding cannot tell apart, the simplest (as they are listed)."""
    smallest = min(allowed, key=lambda c: c.score.residual)
    if not at_roundoff(smallest.score):
        return smallest
    return next(c for c in allowed if at_roundoff(c.score))


def _ranked(candidates: list[Candidate]) -> list[Candidate]:
    """The best candidate of each arrangement, best first."""
    found: dict[tuple[object, ...], Candidate] = {}
    for candidate in sorted(candidates, key=lambda c: c.score.residual):
        found.setdefault(candidate.arrangement, candidate)
    return list(found.values())


def _listed(candidates: Sequence[Candidate], most: int = 4) -> str:
    """What distinguishes the best candidates, as alternatives; the soft choices (scheme, u, v) follow from these."""
    shown = _ranked(list(candidates))[:most]
    return "; or ".join(c.words(_open_keys(shown) or None) for c in shown)


def _open_keys(candidates: Sequence[Candidate]) -> frozenset[str]:
    """The keys in which arrangements differ."""
    tables = [c.keys() for c in candidates]
    return frozenset(k for k in ("axes", "surface", "w_position") if len({table[k] for table in tables}) > 1)


def _pins_text(pins: Pins) -> str:
    parts = []
    if pins.roles is not None:
        parts.append(f"axes {', '.join(pins.roles)}")
    if pins.z_sign is not None:
        parts.append(f"surface {'last' if pins.z_sign > 0 else 'first'}")
    if pins.w_position is not None:
        parts.append(f"w_position {pins.w_position}")
    if pins.w_offsets:
        parts.append(f"levels of w: {', '.join(sorted(pins.w_offsets))}")
    parts += [f"{n} {p}" for n, p in (("u_position", pins.u_position), ("v_position", pins.v_position)) if p]
    if pins.scheme:
        parts.append(f"horizontal_scheme {pins.scheme}")
    return "; ".join(parts)
