"""Whether speeds not to dwell at can be found for the conditions that ask for them."""

from typing import TYPE_CHECKING, cast

from detune.brief.allowable.base import BandAllowable, HarmonicAllowable
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.brief.finding import Finding, Path

if TYPE_CHECKING:
    from detune.brief.allowable.dwell_bands import DwellBands

BESIDE = ("condition", "forcing")


def dwell_checked(brief: Brief) -> list[Finding]:
    """Return what stands in the way of finding the smallest bands to bar."""
    findings: list[Finding] = []
    seen: dict[str, int] = {}
    for index, allowable in enumerate(brief.allowables):
        if allowable.kind != "dwell-bands":
            continue
        limit = cast("DwellBands", allowable)
        path: Path = ("allowable", index)
        for condition in brief.conditions:
            if applies(limit.conditions, condition.name):
                findings += _in_condition(brief, path, limit, condition)
                if condition.name in seen:
                    expected = f'one limit of this kind in condition "{condition.name}"'
                    findings.append(Finding(path, limit.kind, expected, depends=("condition",)))
                seen[condition.name] = index
        findings += _whole_brief(brief, path)
    return findings


def _whole_brief(brief: Brief, path: Path) -> list[Finding]:
    findings = []
    if "least-margin" in brief.objectives.trade:
        expected = (
            'objectives without "least-margin" beside dwell-bands: at the edge of a barred band a limit is just met, '
            "so the least margin of such a design is none"
        )
        findings.append(Finding(("objectives", "trade"), "least-margin", expected, depends=("allowable",)))
    if brief.scatter is not None:
        expected = (
            'no [scatter] beside dwell-bands, which are found at listed values; with scatter state "barred" speeds in '
            "the condition, which then hold for every part"
        )
        findings.append(Finding(path, "dwell-bands", expected, depends=("scatter",)))
    if brief.sizing is not None:
        expected = 'no [sizing] beside dwell-bands; state "barred" speeds in the condition'
        findings.append(Finding(path, "dwell-bands", expected, depends=("sizing",)))
    return findings


def _in_condition(brief: Brief, path: Path, limit: "DwellBands", condition: Condition) -> list[Finding]:
    named = f'condition "{condition.name}"'
    acting = [f for f in brief.forcing if applies(f.conditions, condition.name)]

    def found(what: str, expected: str, at: tuple[str, ...] = ()) -> Finding:
        return Finding((*path, *at), what, expected, depends=BESIDE)

    if limit.shaft not in condition.shafts:
        known = ", ".join(condition.shafts) or "none is stated"
        expected = f'a shaft of {named} ({known}), or the conditions it is meant for, as "conditions"'
        return [found(limit.shaft, expected, ("shaft",))]
    low, high = condition.shafts[limit.shaft]
    findings = []
    if not condition.steady:
        findings.append(found(condition.name, "a steady condition: in others the machine does not dwell"))
    if high <= low:
        findings.append(found(f"{60.0 * low:.6g} rev/min", f"a range of speed of {limit.shaft} in {named}"))
    elif limit.width is not None and limit.width >= high - low:
        told = f"{60.0 * (high - low):.6g} rev/min"
        findings.append(
            found(f"{60.0 * limit.width:.6g} rev/min", f"less than the whole range, {told}", ("width",))
        )
    if limit.shaft in condition.barred:
        findings.append(
            found(limit.shaft, f'either "barred" speeds of this shaft in {named} or a limit of this kind')
        )
    for forcing in acting:
        if forcing.noises() or forcing.transients():
            expected = (
                f'tones alone in {named}: conditions without "{forcing.name}", as "conditions", since its response '
                "does not depend on the speed"
            )
            findings.append(found(forcing.name, expected))
    for other in brief.allowables:
        ratio = isinstance(other, HarmonicAllowable) and other.unit_load() is not None
        if (ratio or isinstance(other, BandAllowable)) and applies(other.conditions, condition.name):
            expected = (
                f"limits on responses at one speed in {named}: state {other.kind} for other conditions, as "
                '"conditions"'
            )
            findings.append(found(other.kind, expected))
    return findings
