"""What every test shares: one BLAS thread, the hypothesis profile, a made-up result, the count of checks."""

from __future__ import annotations

import os
from collections import Counter
from dataclasses import replace
from pathlib import Path

import hypothesis
import pytest

from purity.result import (
    Band,
    ChoiceResult,
    ContactLine,
    Line,
    Result,
    RouteResult,
    ScenarioFacts,
    Stamp,
    StepResult,
)

# Before anything loads numpy: one thread gives the same bits in every run.
for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
hypothesis.settings.register_profile("here", deadline=None)
hypothesis.settings.register_profile("ci", deadline=None, derandomize=True)
hypothesis.settings.load_profile("ci" if os.environ.get("CI") else "here")

REFERENCE = Path(__file__).parent / "reference"


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    """Say how many checks were held against sources outside the project; the topic is the file's name."""
    passed, seen = Counter(), Counter()
    for outcome in ("passed", "failed", "skipped", "xfailed", "error"):
        for report in terminalreporter.stats.get(outcome, []):
            path = Path(str(getattr(report, "fspath", "")))
            if path.parent.name == REFERENCE.name and getattr(report, "when", "call") == "call":
                topic = path.stem.removeprefix("test_").replace("_", " ")
                seen[topic] += 1
                passed[topic] += outcome == "passed"
    if seen:
        terminalreporter.section("checks against sources outside the project")
        for topic in sorted(seen):
            terminalreporter.write_line(f"{topic}: {passed[topic]} of {seen[topic]} agree")
        terminalreporter.write_line(f"all topics: {sum(passed.values())} of {sum(seen.values())} agree")


def made_up_line(
    impurity: str,
    start: float | None,
    end: tuple[float, float, float] | None,
    limit: float | None,
    **more: object,
) -> Line:
    """A line whose numbers are invented but agree with each other."""
    low, median, high = end or (0.0, 0.0, 0.0)
    known = start is not None and end is not None
    allowed = limit is not None and start is not None and limit > start
    facts: dict[str, object] = {
        "impurity": impurity,
        "block": "gas formers" if impurity in {"C", "N", "O", "H", "S"} else "metals",
        "start": None if start is None else Band(0.9 * start, start, 1.1 * start),
        "end": Band(low, median, high) if end else None,
        "dissolved": Band(low, median, high) if end else None,
        "pickup": Band(low - start, median - start, high - start) if known else None,
        "limit": limit,
        "margin": limit - high if end and limit is not None else None,
        "worst": None,
        "detection": None,
        "spent": (median - start) / (limit - start) if known and allowed else None,
        "word": None,
        "chance_over": 0.0 if end and limit is not None else None,
        "chance_error": 3 / 2048 if end and limit is not None else None,
        "ceiling": None,
        "driving_force": None,
        "held_back_by": None,
        "shares": {},
        "contacts": (),
        "forms": (),
        "records": (),
        "quality": None,
        "extrapolated": False,
        "gap": None,
    }
    return Line(**(facts | more))  # type: ignore[arg-type]


def made_up_choice(name: str, lines: tuple[Line, ...], **more: object) -> ChoiceResult:
    facts: dict[str, object] = {
        "name": name,
        "rank": 1,
        "state": "ranked",
        "tied_with": (),
        "chance_over": 0.0,
        "chance_error": 3 / 2048,
        "deciding": lines[0].impurity if lines else None,
        "spent": lines[0].spent if lines else None,
        "assessed": (len(lines), len(lines)),
        "complete": True,
        "assumed_share": 0.2,
        "lines": lines,
        "host_loss_percent": None,
        "attack_um": None,
        "warnings": (),
    }
    return ChoiceResult(**(facts | more))  # type: ignore[arg-type]


def _melt_lines() -> tuple[Line, ...]:
    oxygen = made_up_line(
        "O",
        2.0,
        (2.6, 3.4, 5.6),
        5.0,
        word="fair",
        chance_over=0.083,
        chance_error=0.012,
        start_method="inert gas fusion",
        held_back_by="supply",
        contacts=(
            ContactLine("furnace leak", Band(0.5, 1.2, 3.1), None),
            ContactLine("charge surface", Band(0.1, 0.2, 0.5), None),
        ),
        ceiling=Band(310.0, 420.0, 570.0),
        driving_force=48200.0,
        shares={"supply": 0.93, "melt transfer": 0.07},
        records=("sieverts:Cu/liquid/O", "transfer:surface/induction"),
        quality="B",
        forms=(),
    )
    carbon = made_up_line(
        "C",
        1.0,
        (1.2, 1.9, 3.4),
        5.0,
        word="fair",
        held_back_by="ceiling",
        contacts=(ContactLine("graphite", Band(0.2, 0.9, 2.4), Band(1.3, 2.1, 3.6)),),
        ceiling=Band(1.3, 2.1, 3.6),
        driving_force=9100.0,
        start_method="inert gas fusion",
    )
    hydrogen = made_up_line("H", 0.1, (0.02, 0.04, 0.09), 0.5, word="gives off", held_back_by="gas film")
    hydrogen = replace(hydrogen, contacts=(ContactLine("argon", Band(-0.08, -0.06, -0.01), None),))
    iron = made_up_line(
        "Fe",
        0.30,
        (0.31, 0.33, 0.38),
        1.0,
        word="ample",
        held_back_by="inventory",
        contacts=(ContactLine("charge surface", Band(0.01, 0.03, 0.08), None),),
        start_method="glow discharge",
        worst=0.44,
    )
    aluminium = made_up_line(
        "Al", 0.02, (0.001, 0.003, 0.012), 0.5, word="ample", detection=0.05, held_back_by="melt transfer"
    )
    silicon = made_up_line("Si", None, None, 0.5, gap="not certified, so only its pickup is known")
    silicon = replace(
        silicon,
        pickup=Band(0.004, 0.031, 0.12),
        held_back_by="wetting",
        contacts=(ContactLine("fused silica sheath", Band(0.004, 0.031, 0.12), None),),
        extrapolated=True,
    )
    sodium = made_up_line("Zn", 0.4, (0.01, 0.05, 0.2), 0.3, word="closed", held_back_by="surface")
    group = made_up_line("Fe+Ni+Co", 0.40, (0.41, 0.43, 0.49), 2.0, word="ample")
    return (oxygen, carbon, hydrogen, iron, aluminium, silicon, sodium, group)


@pytest.fixture
def made_up() -> Result:
    """A run of two steps in an invented works; every number is invented."""
    lines = _melt_lines()
    graphite = made_up_choice(
        "graphite under argon",
        lines,
        chance_over=0.083,
        chance_error=0.012,
        deciding="O",
        assessed=(8, 8),
        assumed_share=0.62,
        measure=("melt/graphite under argon/wetting", "furnace/leak"),
        host_loss_percent=0.02,
        tied_with=("graphite in vacuum [old pump]",),
        warnings=("the sheath is used 40 degC above its service temperature",),
        species=("C", "CO", "O in Cu"),
    )
    vacuum = made_up_choice(
        "graphite in vacuum [old pump]",
        (replace(lines[0], chance_over=0.081),),
        chance_over=0.081,
        chance_error=0.011,
        tied_with=("graphite under argon",),
    )
    open_air = made_up_choice(
        "clay bonded graphite in air",
        (
            replace(
                lines[0], chance_over=1.0, word="over", spent=6.2, end=Band(19.0, 21.0, 30.0), margin=-25.0
            ),
        ),
        rank=3,
        chance_over=1.0,
    )
    magnesia = made_up_choice(
        "magnesia under vacuum",
        (lines[3], made_up_line("Se", 0.05, None, 0.1, gap="no diffusion record of Se in liquid Cu")),
        rank=None,
        state="not ranked",
        complete=False,
        assessed=(9, 10),
        chance_over=None,
        chance_error=None,
        deciding=None,
    )
    steel = made_up_choice(
        "steel pot",
        (),
        rank=None,
        state="attacked",
        chance_over=None,
        deciding=None,
        assessed=(0, 10),
        attack_um=None,
    )
    cast = made_up_choice(
        "cold copper mould", (replace(lines[3], chance_over=0.004, chance_error=0.003),), chance_over=0.004
    )
    return Result(
        Stamp("0.1.0", "d4t4d4t4", "5c3n5c3n", 1, 2048),
        ScenarioFacts(
            "Copper remelt for blanks, Lindhavn works",
            "Cu",
            25.0,
            0.05,
            ("melt/graphite under argon/wetting",),
            {"O": 5.0, "C": 5.0},
            ("Zn is certified above its limit (word: closed)",),
        ),
        (
            StepResult("melt", "melt", (), (graphite, vacuum, open_air, magnesia, steel)),
            StepResult("pour", "cast", ("graphite under argon",), (cast,)),
        ),
        (
            RouteResult(("graphite under argon", "cold copper mould"), 0.085, 0.012, "O", 1),
            RouteResult(("graphite in vacuum [old pump]", "cold copper mould"), 0.09, 0.012, "O", 2),
            RouteResult(
                ("magnesia under vacuum", "cold copper mould"), None, None, None, None, gap="no data: Se"
            ),
        ),
        ("Molten copper on wet tools throws metal: dry and preheat; follow your safety data sheets.",),
        ("diffusion:Cu/liquid/Se: no record; nearest diffusion:Cu/liquid/S",),
        ("Invented, A. Nobody, 2026",),
    )
