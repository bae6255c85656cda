"""A scenario from its file: everything read, checked against each other, in metres and days. All errors at once."""

import hashlib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any, TypeVar

from . import changes_in, features_in, plausible
from .intake import Intake
from .levels_in import Levels, read_levels
from .quantities import Stated
from .questions import question_module, question_names
from .scenario import (
    AquiferInput,
    Beyond,
    Question,
    Scenario,
    Site,
    UnevenGround,
    UniformFlow,
    Value,
)
from .schema import scenario_model
from .schema_check import check_block
from .site_in import read_crs, read_site
from .units import UNITS, Bare
from .yaml_tree import read_tree

T = TypeVar("T")


def load(path: str | Path, *, allow_outside: bool = False) -> Scenario:
    """A checked scenario from a YAML file.

    allow_outside: also read data files outside the scenario's folder tree. Raises InputError with every problem.
    """
    tree = read_tree(Path(path))
    bare = _bare(tree.data)
    block, problems = check_block(scenario_model(), tree.data, tree, bare)
    intake = Intake(tree, bare, "local", allow_outside, problems)
    intake.finish()
    intake.crs = read_crs(block.site, intake)
    scenario, levels = _assembled(block, intake)
    scenario = replace(scenario, cases=changes_in.read_cases(block.cases, scenario, intake))
    plausible.check(scenario, levels, intake)
    questions = _questions(block, scenario, intake)
    intake.finish()
    return replace(scenario, questions=questions, notes=tuple(intake.notes))


def _bare(data: Any) -> Bare:
    """What bare lengths mean; metres until the check of the site has refused a wrong unit."""
    site = data.get("site") if isinstance(data, dict) else None
    unit = site.get("length") if isinstance(site, dict) else None
    return Bare(UNITS["length"][unit] if unit in ("m", "ft", "ft_us") else 1.0)


def _assembled(block: Any, intake: Intake) -> tuple[Scenario, Levels]:
    """The scenario without cases and questions, and its levels with the rows they come from."""
    levels = read_levels(block.levels, intake)
    wells = tuple(features_in.read_wells(block.wells, intake))
    streams = _each(block.streams, "streams", features_in.read_stream, intake)
    lakes = _each(block.lakes, "lakes", features_in.read_lake, intake)
    recharge = _each(block.recharge, "recharge", features_in.read_recharge, intake)
    gaugings = _each(block.gaugings, "gaugings", features_in.read_gauging, intake)
    outline = features_in.read_outline(block.outline, intake)
    around = [(v.level.x, v.level.y) for v in levels.rows if v.level.left_out is None]
    every = around + [(w.x, w.y) for w in wells]
    for line in (*streams, *lakes, *(r for r in recharge if r.x is not None), *((outline,) if outline else ())):
        every += list(zip(line.x.tolist(), line.y.tolist(), strict=True))
    site = read_site(block.site, around, every, intake) or Site("local", "unknown", None, 0.0, 1.0, 0.0, 1.0)
    if block.site.heights == "unknown":
        intake.note("the vertical datum is unknown: heights of different sources may not fit each other")
    text = intake.tree.file.read_bytes()
    scenario = Scenario(
        intake.tree.file.resolve(),
        hashlib.sha256(text).hexdigest(),
        block.title,
        site,
        _aquifer(block.aquifer, intake),
        _beyond(block.beyond),
        outline,
        wells,
        streams,
        lakes,
        recharge,
        tuple(v.level for v in levels.rows),
        levels.datum_sd,
        gaugings,
        (),
        block.solve.tolerance,
        block.solve.seed,
        (),
    )
    return scenario, levels


def _each(blocks: dict[str, Any], kind: str, read: Callable[..., T | None], intake: Intake) -> tuple[T, ...]:
    found = [read(name, block, intake, (kind, name)) for name, block in blocks.items()]
    return tuple(f for f in found if f is not None)


def _aquifer(block: Any, intake: Intake) -> AquiferInput:
    def value(key: str) -> Value | None:
        stated: Stated | None = getattr(block, key)
        return None if stated is None else stated.at(f"aquifer.{key}")

    uneven = None
    if not isinstance(block.uneven, str):
        spread, patch = block.uneven.spread, block.uneven.patch
        uneven = UnevenGround(spread.at("aquifer.uneven.spread"), patch.at("aquifer.uneven.patch"))
        if "uneven" not in block.model_fields_set:
            intake.note(f"uneven ground: spread {spread.value:g} and patches of {patch.value:g} m assumed")
    base, conductivity, porosity = value("base"), value("conductivity"), value("porosity")
    assert base is not None
    assert conductivity is not None
    assert porosity is not None
    return AquiferInput(base, value("top"), conductivity, porosity, value("storage"), uneven)


def _beyond(block: Any) -> Beyond:
    flow = None
    if block.flow is not None:
        f, at = block.flow, "beyond.flow"
        flow = UniformFlow(
            None if f.gradient is None else f.gradient.at(f"{at}.gradient"),
            None if f.discharge is None else f.discharge.at(f"{at}.discharge"),
            f.towards.at(f"{at}.towards"),
            *f.at,
        )
    if block.reference is None:
        return Beyond(None, None, None, flow)
    x, y = block.reference.at
    return Beyond(x, y, block.reference.head.at("beyond.reference.head"), flow)


def _questions(block: Any, scenario: Scenario, intake: Intake) -> tuple[Question, ...]:
    asked = []
    for i, entry in enumerate(block.questions):
        kind = next(n for n in question_names() if getattr(entry, n) is not None)
        options = getattr(entry, kind)
        # a well or a case that was refused above would only be reported twice
        if not intake.problems:
            for path, text, help in question_module(kind).problems(options, scenario):
                intake.error("question", f"{kind}: {text}", ("questions", i, kind, *path), help)
        asked.append(Question(kind, options))
    return tuple(asked)
