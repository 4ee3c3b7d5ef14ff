"""What limits a design, in sentences: pressures in any unit, from the numbers of the results."""

from __future__ import annotations

import math

from trainopt.train.results import BlockLimit, Gain, LongerRun
from trainopt.units import convert

CAPS = {
    "loading-tested": "the loading tested",
    "loading-limit": "the loading limit",
    "turbidity": "the turbidity limit",
}


def block_words(limit: BlockLimit, units: str = "bar") -> str:
    """What binds in a block."""
    if limit.head is None or limit.spare is None:
        return limit.text
    head, spare = (convert(bar, "pressure", units) for bar in (limit.head, limit.spare))
    held = [f"'{stage}' by {CAPS[why]}" for stage, why in limit.stages.items() if why in CAPS]
    if limit.spare > 0.0:
        text = f"'{limit.block}' leaves {spare:.3g} of {head:.3g} {units} unused"
    else:
        text = f"'{limit.block}' uses all of its {head:.3g} {units}"
    return text + ("; held: " + ", ".join(held) if held else "")


def gain_words(gain: Gain, units: str = "bar") -> str:
    """What a little more of one limit would gain; of the safety factor, a little less."""
    if not gain.what:
        return gain.text
    if gain.unit == "":
        return f"{gain.what} of {rounded(gain.needs, -1)} in place of {gain.now:.4g} saves {gain.saved}: {gain.buys}"
    unit = units if gain.unit == "bar" else gain.unit
    needs, now = (convert(v, "pressure", units) if gain.unit == "bar" else v for v in (gain.needs, gain.now))
    more, shown = needs - now, unit
    if unit == "h" and more < 2.0:
        more, shown = more * 60.0, "min"
    change = f"{rounded(more, 1, 2)} {shown} more for {gain.what} ({rounded(needs, 1)} {unit})"
    return f"{change} saves {gain.saved}: {gain.buys}"


def longer_run_words(run: LongerRun, units: str = "bar") -> str:
    """What a longer bench run would be worth."""
    if not run.saved:
        return run.text
    pressure = f"{convert(run.pressure, 'pressure', units):.2g} {units}"
    return (
        f"run {run.medium} to {rounded(run.loading, 1)} L/m2 (so far {run.tested:.4g}), about {pressure} at "
        f"{run.flux:.3g} LMH: up to {run.saved} less, if the fitted curve holds that far"
    )


def rounded(value: float, direction: int, digits: int = 4) -> str:
    """So many digits of a value above zero, rounded to the side that still works (+1 up, −1 down)."""
    places = digits - 1 - math.floor(math.log10(abs(value)))
    scaled = value * 10.0**places
    whole = math.ceil(scaled * (1.0 - 5e-8) - 1e-7) if direction > 0 else math.floor(scaled * (1.0 + 5e-8) + 1e-7)
    return f"{whole / 10.0**places:.{digits}g}"
