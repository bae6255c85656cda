"""An independent truth for steady Dupuit flow: scikit-fem, quadratic triangles, none of our elements.

With one flat base and top the flow is K(x) grad u, u = (h - b)^2 / 2 where the water table is free and
B (h - b) - B^2 / 2 where it is confined (Strack 1989, ch. 8: the discharge potential divided by K). So
div(K grad u) = -N is linear in u for confined, unconfined and converting flow alike, in even or uneven ground.

Flows of features are the consistent weak residual on their nodes, which converges at twice the order of the flux
read from the elements (Carey 1982).
"""

from dataclasses import dataclass, field, replace  # noqa: F401 (tests use fem.replace)

import fem_mesh
import numpy as np
import scipy.sparse as sp
import shapely
import skfem
from scipy.interpolate import RegularGridInterpolator
from scipy.sparse.linalg import spsolve
from skfem.helpers import dot, grad


@dataclass(frozen=True)
class Well:
    """A point sink: rate > 0 (m3/d) takes water out; the mesh has edges of a quarter ``radius`` (m) there."""

    name: str
    x: float
    y: float
    rate: float
    radius: float = 0.5


@dataclass(frozen=True)
class Stream:
    """A polyline (n, 2) with stage (m), one value or one a vertex; ``conductance`` (m/d) = width / resistance.

    Without a conductance its water has full contact. A bed is linear only where the aquifer stays confined.
    """

    name: str
    points: np.ndarray
    stage: np.ndarray | float
    conductance: float | None = None


@dataclass(frozen=True)
class Lake:
    """A hole with a ring (n, 2) and one head (m)."""

    name: str
    ring: np.ndarray
    stage: float


@dataclass(frozen=True)
class Site:
    """Everything of a truth. ``shore`` None makes the outer ring impermeable, otherwise it is its head (m).

    ``conductivity``: m/d, a number or f(x, y). ``recharge``: m/d everywhere; ``patches``: pairs (ring, m/d), added.
    ``size``: largest edge (m); ``tip``: edge at a stream's free end (m); ``slope``: growth of edges with distance.
    """

    outer: np.ndarray
    base: float
    conductivity: object
    size: float
    top: float | None = None
    shore: float | None = None
    recharge: float = 0.0
    patches: tuple = ()
    wells: tuple = ()
    streams: tuple = ()
    lakes: tuple = ()
    tip: float = 0.5
    slope: float = 0.3


@dataclass(frozen=True)
class Truth:
    """The solved field: ``flows`` holds m3/d into the aquifer by feature, ``shore`` for the outer ring."""

    site: Site
    flows: dict
    mesh: fem_mesh.Mesh
    basis: skfem.Basis
    values: np.ndarray = field(repr=False)
    sources: np.ndarray = field(repr=False)  # m3/d into the aquifer at each node of a feature

    def u(self, x, y):
        """Potential over conductivity (m2) at x, y (m); NaN outside the land."""
        at = np.column_stack([np.ravel(x), np.ravel(y)]).astype(float)
        simplex = self.mesh.locator.find_simplex(at)
        frame = self.mesh.locator.transform[simplex]
        two = np.einsum("kij,kj->ki", frame[:, :2], at - frame[:, 2])
        share = np.column_stack([two, 1 - two.sum(axis=1)])
        element = np.where(simplex >= 0, self.mesh.element_of_simplex[simplex], -1)
        # scikit-fem sorts the corners of every triangle
        share = np.take_along_axis(share, np.argsort(self.mesh.triangles[element], axis=1), axis=1)
        nodes = self.basis.element_dofs[:, element]  # corners, then middles of the sides 01, 12, 02
        a, b, c = share.T
        shape = [a * (2 * a - 1), b * (2 * b - 1), c * (2 * c - 1), 4 * a * b, 4 * b * c, 4 * a * c]
        found = np.einsum("nk,nk->k", np.array(shape), self.values[nodes])
        return np.where(element >= 0, found, np.nan).reshape(np.shape(x))

    def head(self, x, y):
        """Head (m) at x, y (m); NaN outside the land."""
        return head_of(self.site, self.u(x, y))

    def gain(self, name, until=1.0):
        """Water (m3/d) that the stream ``name`` gains from its source to the share ``until`` of its length."""
        stream = next(s for s in self.site.streams if s.name == name)
        place = _share_of_length(stream.points, self.mesh.shares[name])
        pieces = self.mesh.pieces[name]
        ends = np.concatenate([pieces[:, 0], pieces[-1:, 1]])
        middles = self.basis.facet_dofs[0, _facets(self.basis.mesh, pieces)]
        corners = -self.sources[self.basis.nodal_dofs[0, ends]]
        return float(
            corners[place <= until].sum() - self.sources[middles][0.5 * (place[1:] + place[:-1]) <= until].sum()
        )


def u_of(site, head):
    """The variable u (m2) that belongs to a head (m)."""
    deep = np.asarray(head, dtype=float) - site.base
    if np.any(deep <= 0):
        raise ValueError("a stated head lies below the base")
    if site.top is None:
        return 0.5 * deep**2
    full = site.top - site.base
    return np.where(deep < full, 0.5 * deep**2, full * deep - 0.5 * full**2)


def head_of(site, u):
    """The head (m) that belongs to u (m2); NaN where the ground is dry (u < 0)."""
    free = np.sqrt(2 * np.where(np.asarray(u) >= 0, u, np.nan))
    if site.top is None:
        return site.base + free
    full = site.top - site.base
    return site.base + np.where(free < full, free, u / full + 0.5 * full)


def solve(site):
    """Mesh the site, solve for u, and return the Truth; a mesh that cannot follow the map is refused."""
    mesh = _mesh(site)
    triangles = skfem.MeshTri(np.ascontiguousarray(mesh.points.T), np.ascontiguousarray(mesh.triangles.T))
    basis = skfem.Basis(triangles, skfem.ElementTriP2(), intorder=4)
    x, y = np.asarray(basis.global_coordinates())
    k = site.conductivity(x, y) if callable(site.conductivity) else np.full(x.shape, float(site.conductivity))
    stiffness = skfem.BilinearForm(lambda u, v, w: w.k * dot(grad(u), grad(v))).assemble(basis, k=k)
    load = skfem.LinearForm(lambda v, w: w.n * v).assemble(basis, n=_recharge(site, mesh, x.shape))
    for well in site.wells:
        load -= well.rate * _at_point(basis, mesh, well.x, well.y)
    bed, bed_load, fixed, known, owner = _waters(site, mesh, basis)
    u = np.zeros(basis.N)
    u[fixed] = known
    free = np.setdiff1d(np.arange(basis.N), fixed)
    system = (stiffness + sum(bed.values(), sp.csr_matrix(stiffness.shape))).tocsr()
    right = load + sum(bed_load.values(), np.zeros(basis.N)) - system @ u
    u[free] = spsolve(system[free][:, free].tocsc(), right[free])
    sources = stiffness @ u - load
    flows = {name: float(sources[nodes].sum()) for name, nodes in owner.items()}
    flows |= {name: float((bed_load[name] - bed[name] @ u).sum()) for name in bed}
    due = float(load.sum())  # recharge less wells
    if flows and abs(sum(flows.values()) + due) > 1e-7 * max(np.abs(load).sum(), *map(abs, flows.values())):
        raise ValueError(f"the balance does not close: {flows} against {-due:.6g} m3/d")
    if bed and head_of(site, u).min() < site.top:
        raise ValueError("a bed needs an aquifer that stays confined: some heads lie below its top")
    return Truth(site, flows, mesh, basis, u, sources)


def simulated_ground(box, mean, spread, patch, seed, step=20.0):
    """f(x, y) = K in m/d: log-normal, exponential correlation exp(-r / patch), by circulant embedding.

    ``box``: x0, x1, y0, y1 (m); ``mean``: geometric mean (m/d) of the ensemble; linear between grid points.
    Dietrich and Newsam (1993); the few negative eigenvalues of the torus are set to zero.
    """
    x0, x1, y0, y1 = box
    gx, gy = np.arange(x0 - step, x1 + 2 * step, step), np.arange(y0 - step, y1 + 2 * step, step)
    n, m = (len(g) + int(6 * patch / step) for g in (gx, gy))
    dx, dy = (step * np.minimum(np.arange(c), c - np.arange(c)) for c in (n, m))
    power = np.maximum(np.fft.fft2(np.exp(-np.hypot(dx[:, None], dy[None]) / patch)).real, 0)
    random = np.random.default_rng(seed)
    noise = random.standard_normal((n, m)) + 1j * random.standard_normal((n, m))
    ln_k = np.fft.fft2(np.sqrt(power / (n * m)) * noise).real[: len(gx), : len(gy)]
    table = RegularGridInterpolator((gx, gy), np.log(mean) + spread * ln_k)
    return lambda x, y: np.exp(table(np.stack([x, y], axis=-1)))


def _mesh(site):
    lines = [fem_mesh.Line("shore", site.outer, closed=True, grade=False)]
    lines += [fem_mesh.Line(lake.name, lake.ring, closed=True) for lake in site.lakes]
    lines += [fem_mesh.Line(stream.name, stream.points, closed=False) for stream in site.streams]
    lines += [fem_mesh.Line(f"patch {i}", ring, closed=True, grade=False) for i, (ring, _) in enumerate(site.patches)]
    names = [line.name for line in lines]
    if len(set(names)) < len(names):
        raise ValueError("two features share a name")
    wells = [(well.x, well.y, well.radius) for well in site.wells]
    holes = [lake.ring for lake in site.lakes]
    return fem_mesh.build(site.outer, holes, lines, wells, size=site.size, tip=site.tip, slope=site.slope)


def _recharge(site, mesh, shape):
    """Recharge (m/d) at the quadrature points: the mesh follows the patches, so one value an element."""
    centre = mesh.points[mesh.triangles].mean(axis=1)
    rate = np.full(len(centre), float(site.recharge))
    for ring, adds in site.patches:
        rate[shapely.contains_xy(shapely.Polygon(ring), centre[:, 0], centre[:, 1])] += adds
    return np.broadcast_to(rate[:, None], shape).copy()


def _at_point(basis, mesh, x, y):
    """The shape functions (N,) at a point: the load of a unit source there."""
    at = np.array([x, y], dtype=float)
    simplex = int(mesh.locator.find_simplex(at))
    element = int(mesh.element_of_simplex[simplex]) if simplex >= 0 else -1
    if element < 0:
        raise ValueError(f"the well at {x}, {y} is not on land")
    two = mesh.locator.transform[simplex][:2] @ (at - mesh.locator.transform[simplex][2])
    a, b, c = np.append(two, 1 - two.sum())[np.argsort(mesh.triangles[element])]
    out = np.zeros(basis.N)
    shape = [a * (2 * a - 1), b * (2 * b - 1), c * (2 * c - 1), 4 * a * b, 4 * b * c, 4 * a * c]
    out[basis.element_dofs[:, element]] = shape
    return out


def _waters(site, mesh, basis):
    """Beds (matrix, load by name), fixed nodes with their u, and which feature owns them (lakes before streams)."""
    bed, bed_load, value, owner = {}, {}, {}, {}
    features = [(lake.name, None, lake.stage, None) for lake in site.lakes]
    features += [("shore", None, site.shore, None)] if site.shore is not None else []
    features += [(s.name, s.points, s.stage, s.conductance) for s in site.streams]
    for name, points, stage, conductance in features:
        pieces, place = mesh.pieces[name], mesh.shares[name]
        stages = np.broadcast_to(stage, len(points) if points is not None else int(place[-1]) + 1)
        here = np.interp(place, np.arange(len(stages)), stages)
        middle = basis.facet_dofs[0, _facets(basis.mesh, pieces)]
        nodes = np.column_stack([basis.nodal_dofs[0, pieces], middle])
        us = u_of(site, np.column_stack([here[:-1], here[1:], 0.5 * (here[:-1] + here[1:])]))
        if conductance is None:
            mine = {int(n): v for n, v in zip(nodes.ravel(), us.ravel()) if int(n) not in value}
            value |= mine
            owner[name] = np.array(sorted(mine))
            continue
        if site.top is None:
            raise ValueError("a bed needs a confined aquifer")
        # flow per length C (hs - h) = C / B (us - u); the mass matrix of a quadratic line piece
        length = np.hypot(*(mesh.points[pieces[:, 1]] - mesh.points[pieces[:, 0]]).T)
        unit = np.array([[4.0, -1, 2], [-1, 4, 2], [2, 2, 16]]) / 30
        local = conductance / (site.top - site.base) * length[:, None, None] * unit
        rows, columns = np.repeat(nodes, 3, axis=1).ravel(), np.tile(nodes, (1, 3)).ravel()
        bed[name] = sp.csr_matrix((local.ravel(), (rows, columns)), shape=(basis.N, basis.N))
        bed_load[name] = np.bincount(nodes.ravel(), (local @ us[..., None]).ravel(), minlength=basis.N)
    fixed = np.array(sorted(value), dtype=int)
    return bed, bed_load, fixed, np.array([value[n] for n in fixed]), owner


def _facets(mesh, pieces):
    """Numbers of the mesh edges that the pieces (k, 2) are; the mesh is refused when one is not an edge."""
    count = mesh.p.shape[1]
    keys = np.sort(mesh.facets, axis=0).astype(np.int64)
    keys = keys[0] * count + keys[1]
    order = np.argsort(keys)
    wanted = np.sort(pieces, axis=1).astype(np.int64)
    wanted = wanted[:, 0] * count + wanted[:, 1]
    at = np.minimum(np.searchsorted(keys[order], wanted), len(keys) - 1)
    if np.any(keys[order][at] != wanted):
        raise ValueError("a piece of a line is not an edge of the mesh")
    return order[at]


def _share_of_length(points, place):
    """Share of the length (0 source, 1 mouth) of places counted in vertices."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    return np.interp(place, np.arange(len(along)), along / along[-1])
