"""Water that streams bring along: which reaches lie above a place, and whether a stream has the water that it loses."""

import numpy as np
import shapely

from ..elements.stream import Stream
from ..solver.balance import upstream_take
from ..solver.boundary import Solution
from .scenario import Scenario, StreamInput

PLACES = 41  # along a stream, at which its flow is looked at


def course(stream: StreamInput) -> shapely.LineString:
    """A stream's line, source to mouth."""
    return shapely.LineString(np.stack([stream.x, stream.y], axis=1))


def reaches_above(streams: dict[str, StreamInput], name: str, distance: float) -> list[tuple[str, float]]:
    """Streams and how far along them (m) that feed a stream down to a distance along it, itself first.

    A tributary counts whole when its mouth lies above the place, taken at the nearest point of the stream.
    """
    out = [(name, distance)]
    line = course(streams[name])
    for other in streams.values():
        if other.into == name and other.name != name:
            mouth = shapely.Point(other.x[-1], other.y[-1])
            if float(line.project(mouth)) <= distance:
                out += reaches_above(streams, other.name, float(course(other).length))
    return out


def least_flow(scenario: Scenario, solution: Solution, name: str) -> tuple[float, float] | None:
    """Smallest flow (m3/d) along a stream and the share of its length where; None where a source's flow is not stated.

    scenario: with fitted values put in. Negative where the stream gives the ground more than it carries: the field
    then lets it lose water that it does not have.
    """
    streams = {s.name: s for s in scenario.streams}
    length = float(course(streams[name]).length)
    if any(streams[above].starts_with is None for above, _ in reaches_above(streams, name, length)):
        return None
    index = {line.name: k for k, line in enumerate(solution.places.lines) if isinstance(line, Stream)}
    mesh, x = solution.state.system.mesh, solution.state.x
    flows = []
    for share in np.linspace(0.0, 1.0, PLACES):
        flow = 0.0
        for above, distance in reaches_above(streams, name, share * length):
            start = streams[above].starts_with
            assert start is not None
            flow += start.value + float(upstream_take(mesh, index[above], distance) @ x)
        flows.append(flow)
    k = int(np.argmin(flows))
    return flows[k], k / (PLACES - 1)
