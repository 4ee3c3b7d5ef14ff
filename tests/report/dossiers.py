"""Dossiers built by hand, one for each shape of a scenario that a report has to cope with."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tests.report import results
from trainopt.curves.curve import Curve
from trainopt.report.course_figure import Course
from trainopt.report.dossier import Dossier, VolumePoint
from trainopt.report.stage_figure import StageCurve
from trainopt.train.limit_words import gain_words
from trainopt.train.results import (
    Alternatives,
    AreaPart,
    AreaParts,
    BlockLimit,
    Chance,
    Design,
    EvenSplit,
    Gain,
    Limits,
    LongerRun,
    NearDesign,
    Notice,
    Pick,
    Proof,
    ReliabilityResult,
    RouteDesign,
    RouteDesigns,
    Saving,
    SpareBlock,
    UsualDesign,
)

LONG = "a-name-that-goes-on-" * 10
HOSTILE = (
    "<script>alert(1)</script>",
    "=cmd|' /C calc'!A0",
    "+1+1",
    "@SUM(A1)",
    LONG,
    "\u202egnp.exe",
    "مرشح خشن",
    "filter 🧪 & \"more\" 'quotes'",
    "{{ 7*7 }}{% raw %}",
    "$x_1$ \\frac",
    "a\x00b\x1b[31m\nnext",
    "]]> &amp; -->",
)


def dossier(design: Design, curve: Curve | None = None) -> Dossier:
    curve = curve or results.curve()
    lots = ("a", "b")
    stage_curves = tuple(
        StageCurve(
            stage=stage.stage,
            curve=curve,
            lots=tuple((lot, curve.lot_curve(None, ratio)) for lot, ratio in zip(lots, (1.0, 1.1), strict=True)),
            worst_lot="b",
            loading=120.0,
            design_loading=180.0,
            cap=190.0,
            cap_words="loading tested",
        )
        for block in design.blocks
        for stage in block.stages
    )
    time = np.linspace(0.0, 3.84, 21)
    courses = tuple(
        Course(
            block=block.block,
            lot=lot,
            worst=lot == "b",
            limit=block.pressure.limit,
            time=time,
            base=np.full(21, 0.06),
            stages=tuple((stage.stage, share * stage.pressure * np.exp(time - 3.84)) for stage in block.stages),
            flow=np.full(21, 520.0) if block.operation == "constant-flow" else 520.0 * np.exp(-0.2 * time),
            derated=derated,
        )
        for block in design.blocks
        for lot, derated, share in (("a", False, 0.6), ("b", False, 0.7), ("b", True, 1.0))
    )
    return Dossier(
        design=design,
        volume=2000.0,
        time_allowed=6.0,
        safety_factor=1.5,
        schedule="sequential",
        lots=lots,
        curves={curve.medium: curve},
        stage_curves=stage_curves,
        courses=courses,
        assumptions=("Resistance depends on loading alone.",),
        versions={"trainopt": "0.1.0", "highspy": "1.0"},
        options={"Objective asked for": "area"},
        date="2026-01-02T03:04:05+00:00",
        volumes=tuple(
            VolumePoint(200.0 * n, None if n > 12 else 3.4 * n, None if n > 11 else 3.7 * n) for n in range(5, 16)
        )
        if design.blocks
        else (),
    )


def _parts() -> AreaParts:
    amounts = (20.1, 1.1, -0.4, 12.9, 0.5)
    names = ("ideal split", "loading caps", "lots", "safety factor", "whole modules and holders")
    return AreaParts(tuple(AreaPart(n, a, 800.0 * a) for n, a in zip(names, amounts, strict=True)), 1.8, None)


def _limits(name: str = "secondary") -> Limits:
    picks = (Pick("primary", "oat-coarse", "oat-coarse-09", 12),)
    gain = Gain(
        "clarification.pressure_bar", "bar", 1.4, 1.52, 33.3, 0.9, picks, "", "'clarification'",
        f"1 × m fewer in {name}", "0.9 m2",
    )  # fmt: skip
    gain = replace(gain, text=gain_words(gain))
    run = LongerRun("rye-fine", 160.0, 210.0, 150.0, 1.93, 32.0, 2.2, picks, "run rye-fine to 210 L/m2")
    return Limits(
        (BlockLimit("clarification", "pressure", "", 0.97, {"primary": "pressure"}, "", 1.35, 0.04),),
        (gain,),
        (run,),
    )


def beside(design: Design, name: str = "oat-coarse") -> Design:
    """The design with what stands beside it: near designs, other media, reliability, the proof."""
    picks = tuple(Pick(s.stage, s.medium, s.module, s.count) for b in design.blocks for s in b.stages)
    spare = tuple(SpareBlock(block.block, block.time, 0.03 * n) for n, block in enumerate(design.blocks))
    near = tuple(NearDesign(32.4 + 0.3 * n, 32.4 + 0.3 * n, 36144.0, picks, spare, 0.1 * n, 1.5) for n in range(3))
    media = tuple((s.stage, name) for b in design.blocks for s in b.stages)
    routes = (RouteDesign(media, 34.8, 34.8, 40453.0, picks), RouteDesign(media[:1], None, None, None, ()))
    sure = ReliabilityResult(
        0.95, 0.955, Chance(0.9475, 0.94, 0.954), 400, 4000, Chance(0.91, 0.9, 0.92),
        UsualDesign(1.5, 36.3, 40169.0, Chance(1.0, 0.999, 1.0)), 1.21, 1,
    )  # fmt: skip
    proof = Proof("HiGHS", "1.0", "Pyomo", "6.0", 0, 1, None, 0.0, 1e-9, 3, 21, 34)
    return replace(
        design, alternatives=Alternatives(0.05, 5, True, near), routes=RouteDesigns(routes, 9), reliability=sure,
        proof=proof,
    )  # fmt: skip


def _six_stages() -> Design:
    stages = [results.stage(f"stage-{n}", count=c, pressure=0.2) for n, c in enumerate((40, 1, 2, 7, 16, 3))]
    return results.design(
        blocks=(results.block("one-block", *stages),),
        even_split=EvenSplit("infeasible", None, None, None, None, (), "stage-1 finds no module large enough"),
        saving=None,
    )


def _one_stage() -> Design:
    block = results.block("only", results.stage(count=1, holders={}), operation="constant-pressure")
    return results.design(
        blocks=(block,),
        even_split=EvenSplit("optimal", 0.9, 760.0, results.PARTS, 6.0, (block,)),
        saving=Saving(0.0, 0.0, 0.0, 0.0),
        warnings=(),
    )


def _many_blocks() -> Design:
    blocks = tuple(
        results.block(f"block-{n}", results.stage(f"s-{n}-1", count=n + 1), results.stage(f"s-{n}-2", count=3))
        for n in range(3)
    )
    return results.design(blocks=blocks, even_split=None, saving=None)


def hostile() -> Design:
    stages = [
        results.stage(name, medium=name, module=name, holders={name: 2}, count=n + 1, pressure=0.2)
        for n, name in enumerate(HOSTILE)
    ]
    blocks = (
        results.block(HOSTILE[0], *stages[:6], worst_lot=HOSTILE[6]),
        results.block(HOSTILE[4], *stages[6:], worst_lot=HOSTILE[1]),
    )
    return results.design(
        scenario=" ".join(HOSTILE),
        currency=HOSTILE[0],
        blocks=blocks,
        warnings=tuple(Notice(name, name) for name in HOSTILE),
        inputs={name: name for name in HOSTILE},
        even_split=EvenSplit("optimal", 99.0, 1.0, results.PARTS, 6.0, blocks),
    )


def shapes() -> dict[str, Dossier]:
    """Dossiers by name: usual, one stage, six stages, three blocks, reliable, no design, hostile names."""
    return {
        "usual": replace(dossier(results.design()), area_parts=_parts(), limits=_limits()),
        "one-stage": dossier(_one_stage()),
        "six-stages": dossier(_six_stages()),
        "three-blocks": replace(dossier(_many_blocks()), schedule="side-by-side"),
        "reliable": replace(dossier(beside(results.design())), sampled=400),
        "no-design": dossier(results.infeasible()),
        "hostile": dossier(beside(hostile(), HOSTILE[0]), results.curve(medium=HOSTILE[0], law="intermediate")),
    }
