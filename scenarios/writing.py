"""Everything that a run leaves behind: answers.json, maps, tables, layers."""

import json
from pathlib import Path
from typing import Any

import shapely

from .answering import Answers
from .context import BASE, Row
from .desk import KINDS, DrawingDesk
from .layers import layer_text, plain
from .names import safe_file_name
from .summary import parameter_rows, residual_rows
from .swap import WritingError, write_folder
from .tables import table_text

__all__ = ["WritingError", "write"]


def write(answers: Answers, folder: Path, desk: DrawingDesk | None = None) -> None:
    """Write all answers to a folder, whole or not at all; raises WritingError.

    desk: where the maps are being drawn; without one they are drawn here.
    """
    write_folder(folder, lambda fresh: _produce(answers, fresh, desk))


def _produce(answers: Answers, folder: Path, desk: DrawingDesk | None) -> None:
    content = json.dumps(_plain_all(answers.to_json()), indent=2, ensure_ascii=False, allow_nan=False)
    _text(folder / "answers.json", content + "\n")
    crs = answers.scenario.site.crs
    for name, rows in _layers(answers).items():
        _text(folder / f"{name}.geojson", layer_text(name, rows, crs))
    for result in answers.results:
        for name, row in result.files.items():
            (folder / name).parent.mkdir(exist_ok=True)
            _text(folder / name, layer_text(Path(name).stem, [row], crs))
    for name, table in _tables(answers).items():
        _text(folder / f"{name}.csv", table_text(table))
    taken = {"map"}
    for case, files in (_drawn(answers) if desk is None else desk.drawings()).items():
        stem = "map" if case == BASE else safe_file_name(f"map_{case}", taken)
        taken.add(stem)
        for kind, drawing in files.items():
            (folder / f"{stem}.{kind}").write_bytes(drawing)


def _drawn(answers: Answers) -> dict[str, dict[str, bytes]]:
    from .drawing import draw

    return {case: {kind: draw(content, kind) for kind in KINDS} for case, content in answers.maps.items()}


def _text(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")


def _plain_all(value: Any) -> Any:
    if isinstance(value, dict):
        return {str(k): _plain_all(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_plain_all(v) for v in value]
    return plain(value)


def _layers(answers: Answers) -> dict[str, list[Row]]:
    scenario = answers.scenario
    wells = [
        Row(
            shapely.Point(w.x, w.y),
            {"name": w.name, "rate_m3_d": float(r), "head_m": float(answers.flow.head(w.x, w.y))},
        )
        for w, r in zip(answers.model.places.wells, answers.fitted.solution.state.setting.well_rates, strict=True)
    ]
    residuals = {
        row["name"]: row for row in residual_rows(scenario, answers.model, answers.fitted) if row["kind"] == "level"
    }
    levels = [
        Row(shapely.Point(v.x, v.y), {"name": v.name, "observed_m": v.head, "computed_m": residuals[v.name]["computed"],
            "residual_m": residuals[v.name]["residual"], "left_out": v.left_out})
        for v in scenario.levels
    ]  # fmt: skip
    waters = [
        Row(shapely.LineString(list(zip(s.x, s.y, strict=True))), {"name": s.name, "kind": "stream"})
        for s in scenario.streams
    ]
    waters += [_lake(k) for k in scenario.lakes]
    info = Row(None, {"title": scenario.title, "scenario_sha256": scenario.sha256, "seed": scenario.seed,
                      "crs": scenario.site.crs, "heights": scenario.site.heights})  # fmt: skip
    out: dict[str, list[Row]] = {"wells": wells, "levels": levels, "waters": waters, "run_info": [info]}
    for result in answers.results:
        for name, rows in result.layers.items():
            out.setdefault(name, []).extend(rows)
    return out


def _lake(lake: Any) -> Row:
    places = list(zip(lake.x, lake.y, strict=True))
    shape = shapely.Polygon(places) if lake.closed else shapely.LineString(places)
    return Row(shape, {"name": lake.name, "kind": "lake"})


def _tables(answers: Answers) -> dict[str, list[dict[str, Any]]]:
    parameters = []
    for row in parameter_rows(answers.scenario, answers.model, answers.fitted):
        prior = row.pop("prior")
        parameters.append(row | {f"prior_{k}": v for k, v in prior.items()})
        low, high = parameters[-1].pop("interval_90") or (None, None)
        parameters[-1] |= {"interval_90_low": low, "interval_90_high": high}
    balance = [
        {"case": case.name, "feature": r.feature, "kind": r.kind, "inflow_m3_d": r.inflow, "outflow_m3_d": r.outflow}
        for case in answers.cases.values()
        for r in case.solution.balance
    ]
    drawdown = [
        {"case": case.name, "place": name, "drawdown_m": fall}
        for case in answers.cases.values()
        for name, fall in case.drawdown.items()
    ]
    out = {
        "parameters": parameters,
        "residuals": residual_rows(answers.scenario, answers.model, answers.fitted),
        "balance": balance,
        "checks": [{"name": c.name, "passed": c.passed, "value": c.value, "bound": c.bound} for c in answers.checks],
    }
    if drawdown:
        out["drawdown"] = drawdown
    for result in answers.results:
        for name, rows in result.tables.items():
            out.setdefault(name, []).extend(rows)
    return {name: rows for name, rows in out.items() if rows}
