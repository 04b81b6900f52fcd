"""What further tests would tell, in sentences; plainly, where nothing helps."""

from __future__ import annotations

from collections.abc import Iterator

from leachkin.kinetics.evidence import LITTLE_STIRRING
from leachkin.kinetics.next_tests_information import Known
from leachkin.kinetics.next_tests_layout import STIRRING
from leachkin.kinetics.next_tests_result import NextTests

#: A share of an interval below which a test is said to tell little.
LITTLE = 0.1
#: A chance to settle a law below which no test is said to settle it.
EVEN = 0.5


def remarks_of(found: NextTests, known: Known) -> tuple[str, ...]:
    """Return the sentences that belong to the result."""
    return (*_first_intervals(found), *_little(found), *_laws(found), *_limits(found, known))


def _first_intervals(found: NextTests) -> Iterator[str]:
    for outlook in found.present:
        if outlook.low is None:
            unit = f" {outlook.unit}" if outlook.unit else ""
            others = [name for name in outlook.untold if name != outlook.target]
            by = f" (it rests on {', '.join(others)})" if others else ""
            yield (
                f"{outlook.target}: no test tells it now{by}; candidates are judged at "
                f"{outlook.value:.4g}{unit}"
            )


def _little(found: NextTests) -> Iterator[str]:
    told = [outlook for outlook in found.present if outlook.low is not None]
    if not found.present or len(told) < len(found.present):
        return
    best = max(found.rows, key=lambda row: row.shrink)
    if best.shrink < LITTLE:
        names = ", ".join(outlook.target for outlook in told)
        yield (
            f"nothing here helps much: the best of {len(found.rows)} candidates ({best.name}) "
            f"narrows {names} by {100 * best.shrink:.0f} %"
        )


def _laws(found: NextTests) -> Iterator[str]:
    judged = [row for row in found.rows if row.separation is not None]
    if not judged:
        return
    best = max(judged, key=lambda row: row.separation.chance if row.separation else 0.0)
    if best.separation is None:
        return
    chance = 100 * best.separation.chance
    laws = " and ".join(found.laws)
    if best.separation.chance < EVEN:
        yield f"no candidate is likely to tell {laws} apart: best {best.name}, {chance:.0f} %"
    else:
        yield f"{best.name} would tell {laws} apart with a chance of {chance:.0f} %"


def _limits(found: NextTests, known: Known) -> Iterator[str]:
    for name in found.left_out:
        yield f"the prediction takes no other {name}: not in its interval"
    at_bound = [q.name for q, active in zip(known.columns, known.active, strict=True) if not active]
    if at_bound:
        yield f"{', '.join(at_bound)}: at the end of its range, held there"
    for outlook in found.present:
        if outlook.target == STIRRING:
            yield from _film(found)
            continue
        why = _open_side(known, outlook.target)
        if why:
            yield f"{outlook.target}: {why}; its present interval is closed here by linearising"


def _open_side(known: Known, name: str) -> str:
    for parameter in known.fit.parameters:
        if parameter.name == name and parameter.method == "one-sided, linearised":
            return parameter.why_no_interval
    return ""


def _film(found: NextTests) -> Iterator[str]:
    halves = [
        (half, row.name)
        for row in found.rows
        for o in row.outlooks
        if o.target == STIRRING and (half := o.half_width) is not None
    ]
    if halves and min(halves)[0] < LITTLE_STIRRING:
        half, name = min(halves)
        yield (
            f"{name} would tell the power of the stirring speed within {half:.2g}: a film that "
            f"controls gives {LITTLE_STIRRING:g} or more"
        )
    elif halves:
        yield (
            f"no candidate tells the power of the stirring speed within {LITTLE_STIRRING:g}, which "
            "a film would give at least: a wider ratio of speeds, or more bottles"
        )
