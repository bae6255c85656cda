"""A small scenario that tests change in one place."""

LEVELS = "name,x,y,head\nP1,100,150,62.1\nP2,400,300,61.4\nP3,700,520,60.2\nP4,820,200,60.9\n"

SCENARIO = """\
wellshed: 1
title: A small place
site:
  crs: local
  length: m
  heights: local benchmark
  draw: {x: [0, 1000], y: [0, 800]}
aquifer:
  base: 40
  conductivity: {estimate: 15 m/d, factor: 2}
  porosity: 0.22
beyond:
  balance: none
wells:
  Mill 1: {at: [510, 310], pumps: 450 m3/d, radius: 0.3}
streams:
  Elm Brook:
    line: [[900, 700], [850, 400], [920, 100]]
    stage: [[0, 61.5], [1, 59.4]]
lakes:
  Tarn: {edge: [[100, 500], [250, 480], [300, 640], [120, 660]], stage: 62.6}
recharge:
  fields: {area: everywhere, rate: {estimate: 210 mm/yr, factor: 1.4}}
levels:
  file: levels.csv
  error: 0.05
cases:
  more: [{change: wells.Mill 1.pumps, to: 700 m3/d}]
questions:
  - water_table: {interval: auto}
  - capture_zone: {wells: [Mill 1], times: [50 d, 2 yr], cases: [more]}
"""


def put(folder, scenario=SCENARIO, levels=LEVELS):
    """Write the scenario and its levels (text or bytes, None for no file); returns the path of the scenario."""
    if levels is not None:
        raw = levels if isinstance(levels, bytes) else levels.encode("utf-8")
        (folder / "levels.csv").write_bytes(raw)
    file = folder / "scenario.yaml"
    file.write_text(scenario, encoding="utf-8")
    return file


def changed(old, new, text=SCENARIO):
    """The scenario with one part replaced; the part must be there."""
    assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times"
    return text.replace(old, new)
