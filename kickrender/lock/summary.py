"""What a verification says: to people, to programs, to build servers."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Mapping
from dataclasses import asdict
from typing import Any
from xml.etree import ElementTree

from kickrender.lock.causes import Cause
from kickrender.lock.moves import LIMIT_UNITS, MEASURES, Limits, Move
from kickrender.lock.verify import SAME, STATUSES, Verdict, Verification

MOST_HITS = 20
MOST_MOVES = 4

SCHEMA, SCHEMA_VERSION = "kickrender verification", 1


def summary(verification: Verification) -> str:
    """A few lines for people: how many of each, what moved most, why, and which hits."""
    counts = verification.counts
    total = len(verification.verdicts)
    lines = [f"{total} hits: " + ", ".join(f"{count} {status}" for status, count in counts.items())]
    if set(counts) <= {SAME}:
        return lines[0]
    most = moved_most(verification)
    if most:
        width = max(len(move.measure.label) for _, move in most)
        lines += ["moved most:"]
        lines += [f"  {m.measure.label:{width}}  {amount(m)}  {v.name}" for v, m in most]
    causes = Counter(cause for verdict in verification.verdicts for cause in verdict.causes if verdict.status != SAME)
    if causes:
        lines += ["likely causes:"]
        lines += [f"  {cause}  ({_hits(count)})" for cause, count in causes.most_common(MOST_HITS)]
    lines += [f"limits: {limits_text(verification.limits)}"]
    for status in counts:
        if status != SAME:
            lines += _of_status(verification, status)
    return "\n".join(lines)


def _of_status(verification: Verification, status: str) -> list[str]:
    verdicts = [verdict for verdict in verification.verdicts if verdict.status == status]
    verdicts.sort(key=lambda verdict: -furthest(verdict))
    lines = [f"{status} ({STATUSES[status]}):"]
    lines += [f"  {verdict.name}{': ' if told(verdict) else ''}{told(verdict)}" for verdict in verdicts[:MOST_HITS]]
    if len(verdicts) > MOST_HITS:
        lines.append(f"  and {len(verdicts) - MOST_HITS} more; --json names all")
    return lines


def furthest(verdict: Verdict) -> float:
    """How far beyond its limit the furthest measurement moved."""
    return max((move.share for move in verdict.moves), default=0.0)


def told(verdict: Verdict) -> str:
    """One verdict's moves in a line: what moved, or that nothing did."""
    if verdict.failure:
        return verdict.failure
    if verdict.status != SAME and verdict.same_bytes:
        return "the same bytes"
    shown = [str(move) for move in verdict.moves[:MOST_MOVES]]
    if verdict.after is not None and verdict.before is not None and not shown:
        return "other bytes, the same measurements"
    return ", ".join(shown)


def full_text(verdict: Verdict) -> str:
    """A verdict as a failed test tells it: status, moves, causes, a line each."""
    lines = [f"{verdict.name}: {verdict.status}, {STATUSES[verdict.status]}"]
    if verdict.failure:
        lines.append(f"  {verdict.failure}")
    elif verdict.same_bytes:
        lines.append("  the same bytes")
    else:
        lines += [f"  {move}{_from_to(move)}" for move in verdict.moves]
    lines += [f"  likely cause: {cause}" for cause in verdict.causes]
    return "\n".join(lines)


def _from_to(move: Move) -> str:
    return f" ({_number(move.before)} -> {_number(move.after)})" if move.name in MEASURES else ""


def _number(value: float | None) -> str:
    return "none" if value is None else f"{value:.7g}"


def moved_most(verification: Verification) -> list[tuple[Verdict, Move]]:
    """For every measurement that moved anywhere, the hit where it moved most."""
    best: dict[str, tuple[Verdict, Move]] = {}
    for verdict in verification.verdicts:
        for move in verdict.moves:
            if move.name not in best or move.share > best[move.name][1].share:
                best[move.name] = (verdict, move)
    return [best[name] for name in (*MEASURES, "null") if name in best]


def amount(move: Move) -> str:
    """A move without its measure's name."""
    return str(move).removeprefix(move.measure.label).strip()


def _hits(count: int) -> str:
    return f"{count} hit{'' if count == 1 else 's'}"


def limits_text(limits: Limits) -> str:
    """The limits in words."""
    return ", ".join(f"{name} {value:g} {LIMIT_UNITS[name]}" for name, value in asdict(limits).items())


def facts(verification: Verification, tolerance: bool) -> dict[str, Any]:
    """The verification as JSON values; a residual of nothing is null, as is a difference with a missing value."""
    return {
        "schema": SCHEMA,
        "schema_version": SCHEMA_VERSION,
        "lock": str(verification.lock.path) if verification.lock.path else None,
        "title": verification.now.title,
        "passes": verification.passes(tolerance),
        "tolerance": tolerance,
        "limits": {
            name: {"value": value, "unit": LIMIT_UNITS[name]} for name, value in asdict(verification.limits).items()
        },
        "counts": verification.counts,
        "made": {"before": dict(verification.lock.made), "after": dict(verification.now.made)},
        "libraries": {"before": dict(verification.lock.libraries), "after": dict(verification.now.libraries)},
        "hits": [hit_facts(verdict) for verdict in verification.verdicts],
    }


def hit_facts(verdict: Verdict) -> dict[str, Any]:
    """One verdict as JSON values."""
    now = verdict.before if verdict.status == SAME else verdict.after
    return {
        "name": verdict.name,
        "status": verdict.status,
        "same_bytes": verdict.same_bytes,
        "within_limits": verdict.within,
        "pcm_sha256": {
            "before": verdict.before.pcm if verdict.before else None,
            "after": now.pcm if now else None,
        },
        "moves": [_move_facts(move) for move in verdict.moves],
        "causes": [_cause_facts(cause) for cause in verdict.causes],
        "failure": verdict.failure or None,
    }


def _move_facts(move: Move) -> dict[str, Any]:
    by = move.by if move.by is not None and math.isfinite(move.by) else None
    return {
        "measurement": move.name,
        "before": move.before,
        "after": move.after,
        "by": by,
        "unit": move.measure.unit,
        "within_limit": move.share <= 1.0,
    }


def _cause_facts(cause: Cause) -> dict[str, str | None]:
    return {"sort": cause.sort, "what": cause.what, "before": cause.before, "after": cause.after, "text": str(cause)}


def junit_bytes(verification: Verification, tolerance: bool) -> bytes:
    """The verification as JUnit XML: one test case a hit, in a class called by the pack.

    Source: the shape that build servers read by common practice; there is no standard.
    """
    name = verification.now.title or "lock"
    wrong = [v for v in verification.verdicts if not _passes(v, tolerance)]
    counts: Mapping[str, str] = {
        "tests": str(len(verification.verdicts)),
        "failures": str(len(wrong)),
        "errors": "0",
        "skipped": "0",
    }
    root = ElementTree.Element("testsuites", dict(counts))
    suite = ElementTree.SubElement(root, "testsuite", {"name": f"kickrender verify {name}", **counts})
    for verdict in verification.verdicts:
        case = ElementTree.SubElement(suite, "testcase", {"classname": name, "name": verdict.name, "time": "0"})
        if not _passes(verdict, tolerance):
            message = f"{verdict.status}: {told(verdict)}" if told(verdict) else verdict.status
            failure = ElementTree.SubElement(case, "failure", {"type": verdict.status, "message": message})
            failure.text = full_text(verdict)
    ElementTree.indent(root)
    return ElementTree.tostring(root, encoding="utf-8", xml_declaration=True) + b"\n"


def _passes(verdict: Verdict, tolerance: bool) -> bool:
    return verdict.status == SAME or (tolerance and verdict.within)
