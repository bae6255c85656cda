"""One particle through a flow field: Dormand-Prince 5(4) with step control, captures and stated endings.

Position x, y and the potential are integrated together: d(x, y)/dt = +-Q/(n b), dPhi/dt = -+|Q|^2/(n b), with the
saturated thickness b taken from the potential on the way, so that no potential is evaluated in between. A step
never passes a line: one whose chord crosses a line is taken again, shorter, until it lands within LAND of it.

Coefficients: Dormand & Prince (1980); dense output of order 4: Shampine (1986).
"""

import numpy as np

from ..elements.jit import driver, kernel, unowned
from ..elements.kernels_line import N_WORK
from ..elements.kernels_local import flow_at, local_flow_at
from ..elements.local_tree import held_elsewhere
from .endings import Ending
from .obstacles import WALL, ObstacleArrays

A = np.array(
    [
        [0.0, 0.0, 0.0, 0.0, 0.0, 0.0],
        [1 / 5, 0.0, 0.0, 0.0, 0.0, 0.0],
        [3 / 40, 9 / 40, 0.0, 0.0, 0.0, 0.0],
        [44 / 45, -56 / 15, 32 / 9, 0.0, 0.0, 0.0],
        [19372 / 6561, -25360 / 2187, 64448 / 6561, -212 / 729, 0.0, 0.0],
        [9017 / 3168, -355 / 33, 46732 / 5247, 49 / 176, -5103 / 18656, 0.0],
        [35 / 384, 0.0, 500 / 1113, 125 / 192, -2187 / 6784, 11 / 84],
    ]
)
E = np.array([-71 / 57600, 0.0, 71 / 16695, -71 / 1920, 17253 / 339200, -22 / 525, 1 / 40])
P = np.array(
    [
        [1.0, -8048581381 / 2820520608, 8663915743 / 2820520608, -12715105075 / 11282082432],
        [0.0, 0.0, 0.0, 0.0],
        [0.0, 131558114200 / 32700410799, -68118460800 / 10900136933, 87487479700 / 32700410799],
        [0.0, -1754552775 / 470086768, 14199869525 / 1410260304, -10690763975 / 1880347072],
        [0.0, 127303824393 / 49829197408, -318862633887 / 49829197408, 701980252875 / 199316789632],
        [0.0, -282668133 / 205662961, 2019193451 / 616988883, -1453857185 / 822651844],
        [0.0, 40617522 / 29380423, -110615467 / 29380423, 69997945 / 29380423],
    ]
)
LAND = 1e-5  # m: this near to a line a particle has arrived
ASIDE = 1e-3  # m: where the flow on both banks is looked at, and where a particle goes on
SHORT = 0.1  # m: a step below this is straight, and is held to its tangent where that meets a line
SLIP = 0.05  # of its length: a step may end this far behind an impermeable side, and is then set back before it
MOST_REDO = 200
SUB = 6  # a long step is stored in this many pieces
LONG = 5e-4  # of the box: steps longer than this are
SPENT = 1e-7  # against the flow: when recharge has given all but this share of the water, its way up is known
MOST_CRAWL = 12  # this many steps of mm along a wall: the particle has come to a divide on it

WELL, STREAM = int(Ending.WELL), int(Ending.STREAM)
DRAWN_AREA, STAGNATION, TIME = int(Ending.DRAWN_AREA), int(Ending.STAGNATION), int(Ending.TIME)
STEPS, DRY, NOT_FINITE = int(Ending.STEPS), int(Ending.DRY), int(Ending.NOT_FINITE)


@kernel
def _thickness(phi, conductivity, full):
    """Saturated thickness (m) at a potential; 0 where dry."""
    return min(np.sqrt(2.0 * max(phi, 0.0) / conductivity), full)


@kernel
def first_crossing(x0, y0, x1, y1, segment):
    """Share of the chord at the first segment crossed, and that segment's index; (2, -1) if none."""
    best = 2.0
    which = -1
    dx = x1 - x0
    dy = y1 - y0
    low_x = min(x0, x1)
    high_x = max(x0, x1)
    low_y = min(y0, y1)
    high_y = max(y0, y1)
    for k in range(segment.shape[0]):
        ax = segment[k, 0]
        ay = segment[k, 1]
        bx = segment[k, 2]
        by = segment[k, 3]
        if max(ax, bx) < low_x or min(ax, bx) > high_x or max(ay, by) < low_y or min(ay, by) > high_y:
            continue
        ex = bx - ax
        ey = by - ay
        cross = dx * ey - dy * ex
        if cross == 0.0:
            continue
        s = ((ax - x0) * ey - (ay - y0) * ex) / cross
        u = ((ax - x0) * dy - (ay - y0) * dx) / cross
        if 0.0 <= s <= 1.0 and -1e-9 <= u <= 1.0 + 1e-9 and s < best:
            best = s
            which = k
    return best, which


@kernel
def outside(x, y, box):
    """Whether a place is off the box x0, x1, y0, y1."""
    return x < box[0] or x > box[1] or y < box[2] or y > box[3]


@kernel
def within_step(s, h, rate):
    """Move (m) from the start of a step to its share s, by the dense output."""
    mx = 0.0
    my = 0.0
    for j in range(7):
        b = s * (P[j, 0] + s * (P[j, 1] + s * (P[j, 2] + s * P[j, 3])))
        mx += b * rate[j, 0]
        my += b * rate[j, 1]
    return h * mx, h * my


@kernel
def before_wall(x0, y0, x1, y1, segment):
    """The place next to a wall, on the side of point 0, where point 1 behind it is set back to; how far it was."""
    ux = segment[2] - segment[0]
    uy = segment[3] - segment[1]
    length = np.sqrt(ux * ux + uy * uy)
    nx = -uy / length
    ny = ux / length
    before = (x0 - segment[0]) * nx + (y0 - segment[1]) * ny
    after = (x1 - segment[0]) * nx + (y1 - segment[1]) * ny
    side = 1.0 if before > 0.0 else -1.0
    shift = side * ASIDE - after
    return x1 + shift * nx, y1 + shift * ny, abs(after)


@kernel
def follow(x, y, phi, sign, tree, medium, obstacles, t_max, tol, q_rest, marks, at_marks, points, share, work):
    """Follow one particle from x, y (local m) where the potential is phi (m3/d), sign +1 with the flow, -1 against it.

    medium: conductivity, full thickness, porosity. marks (k,): ascending times (d) whose positions go into
    at_marks (k, 2); points (m, 3): x, y, t of the start and of every step, and in between on long ones;
    share (l + 1,): of the water that arrives at the start, what each line gave (the last one: what is still on the
    way at the end), followed against the flow only. Returns the number of points, the ending, the well or line it
    names (-1 none), and steps tried.
    """
    conductivity, full, porosity = medium[0], medium[1], medium[2]
    wells = tree.wells
    owned_rate = np.empty((7, 3))
    rate = unowned(owned_rate)
    t = 0.0
    n_points = 1
    points[0, 0] = x
    points[0, 1] = y
    points[0, 2] = 0.0
    next_mark = 0
    left = 1.0  # share of the water not yet traced to a source
    n_tried = 0
    fresh = False  # rate[0] holds the derivative at the current place
    h = 0.0
    x_new = x
    y_new = y
    phi_new = phi
    reason = 0
    named = -1
    redo = 0
    crawl = -1  # short steps in a row since the particle last slid along a wall, -1 before it ever did
    box = obstacles.box
    size = max(box[1] - box[0], box[3] - box[2])
    recharged = tree.edge.shape[0] > 0
    recharge = 0.0
    infiltration = 0.0
    while reason == 0:
        n_tried += 1
        if n_points >= points.shape[0] - 1 or redo > MOST_REDO:
            reason = STEPS
            break
        bad = 0
        for stage in range(7):
            if stage == 0 and fresh:
                continue
            sx = x
            sy = y
            sp = phi
            for j in range(stage):
                sx += h * A[stage, j] * rate[j, 0]
                sy += h * A[stage, j] * rate[j, 1]
                sp += h * A[stage, j] * rate[j, 2]
            qx, qy, recharge = local_flow_at(sx, sy, tree, work)
            if stage == 0:
                infiltration = recharge
            slow = porosity * _thickness(sp, conductivity, full)
            if slow <= 0.0:
                bad = DRY
                break
            rate[stage, 0] = sign * qx / slow
            rate[stage, 1] = sign * qy / slow
            rate[stage, 2] = -sign * (qx * qx + qy * qy) / slow
            if stage == 0:
                speed = np.sqrt(rate[0, 0] ** 2 + rate[0, 1] ** 2)
                if speed * slow <= q_rest:
                    bad = STAGNATION
                    break
                if h == 0.0:
                    h = 1e-4 * size / speed
                reach = 0.05 * size
                for w in range(wells.shape[0]):
                    gap = np.sqrt((x - wells[w, 0]) ** 2 + (y - wells[w, 1]) ** 2)
                    reach = min(reach, max(0.5 * gap, 0.5 * wells[w, 3]))
                h = min(h, reach / speed, t_max - t)
        if bad != 0:
            if bad == STAGNATION or not fresh or h * speed < 1e-6:
                reason = bad
                break
            h *= 0.2  # a trial stage fell dry: come nearer before saying so
            continue
        x_new, y_new, phi_new = sx, sy, sp
        ex = 0.0
        ey = 0.0
        for j in range(7):
            ex += E[j] * rate[j, 0]
            ey += E[j] * rate[j, 1]
        error = h * np.sqrt(ex * ex + ey * ey)
        if not np.isfinite(error + x_new + y_new):
            reason = NOT_FINITE
            break
        fresh = True
        grow = 5.0 if error == 0.0 else min(5.0, max(0.2, 0.9 * (tol / error) ** 0.2))
        if error > tol and h * speed > 1e-9:
            h *= min(grow, 0.9)
            continue
        crossing, segment = first_crossing(x, y, x_new, y_new, obstacles.segment)
        if segment < 0 and h * speed < SHORT:
            # where both banks send water to the line, trial stages behind it can throw a short step back before it
            x_ahead = x + h * rate[0, 0]
            y_ahead = y + h * rate[0, 1]
            crossing, segment = first_crossing(x, y, x_ahead, y_ahead, obstacles.segment)
            if segment >= 0 and obstacles.ending[segment] == WALL:
                segment = -1
            elif segment >= 0:
                x_new, y_new = x_ahead, y_ahead
        if segment >= 0:
            chord = np.sqrt((x_new - x) ** 2 + (y_new - y) ** 2)
            wall = obstacles.ending[segment] == WALL
            behind = 0.0
            if wall:
                x_set, y_set, behind = before_wall(x, y, x_new, y_new, obstacles.segment[segment])
                if behind <= SLIP * chord + ASIDE:
                    # no water crosses it: what carried the particle over is the step's own error
                    moved = np.sqrt((x_set - x) ** 2 + (y_set - y) ** 2)
                    crawl = crawl + 1 if crawl >= 0 and moved < 5.0 * ASIDE else 0
                    if crawl > MOST_CRAWL:
                        reason = STAGNATION
                        break
                    x, y, t, phi = x_set, y_set, t + h, phi_new
                    points[n_points, 0] = x
                    points[n_points, 1] = y
                    points[n_points, 2] = t
                    n_points += 1
                    redo = 0
                    fresh = False
                    h *= min(grow, 2.0)
                    while next_mark < marks.size and marks[next_mark] <= t:
                        at_marks[next_mark, 0] = x
                        at_marks[next_mark, 1] = y
                        next_mark += 1
                    if t >= t_max:
                        reason = TIME
                    continue
            ux = obstacles.segment[segment, 2] - obstacles.segment[segment, 0]
            uy = obstacles.segment[segment, 3] - obstacles.segment[segment, 1]
            length = np.sqrt(ux * ux + uy * uy)
            nx = -uy / length
            ny = ux / length
            apart = abs((x - obstacles.segment[segment, 0]) * nx + (y - obstacles.segment[segment, 1]) * ny)
            # the distance to the line counts, not that along the path: some come in almost along the bank
            if wall or (apart > LAND and crossing * chord > LAND):
                h *= 0.5 if wall else max(crossing * (1.0 - 1e-3) - 0.3 * LAND / chord, 0.05)
                redo += 1
                continue
            # arrived: what does the water do on the other bank?
            redo = 0
            if nx * (x_new - x) + ny * (y_new - y) < 0.0:
                nx = -nx
                ny = -ny
            line = obstacles.line[segment]
            px = x + crossing * (x_new - x)
            py = y + crossing * (y_new - y)
            arriving = 0.0
            leaving = 0.0
            for side in range(2):  # one call in the code: it is what takes long to compile
                away = (2 * side - 1) * ASIDE
                bank_x, bank_y, _ = flow_at(px + away * nx, py + away * ny, tree, work)
                if side == 0:
                    arriving = sign * (bank_x * nx + bank_y * ny)
                else:
                    leaving = sign * (bank_x * nx + bank_y * ny)
            if obstacles.ending[segment] != STREAM or leaving <= 0.0 or arriving <= 0.0:
                reason = obstacles.ending[segment]
                named = line
                x, y = px, py
                points[n_points, 0] = px
                points[n_points, 1] = py
                points[n_points, 2] = t
                n_points += 1
                share[line] += left
                left = 0.0
                break
            if sign < 0.0 and leaving < arriving:  # against the flow: the stream gave the difference
                share[line] += left * (1.0 - leaving / arriving)
                left *= leaving / arriving
            x = px + ASIDE * nx
            y = py + ASIDE * ny
            phi = phi_new
            points[n_points, 0] = x
            points[n_points, 1] = y
            points[n_points, 2] = t
            n_points += 1
            fresh = False
            continue
        t_new = t + h
        while next_mark < marks.size and marks[next_mark] <= t_new:
            mx, my = within_step((marks[next_mark] - t) / h, h, rate)
            at_marks[next_mark, 0] = x + mx
            at_marks[next_mark, 1] = y + my
            next_mark += 1
        if recharged:
            slow = porosity * 0.5 * (_thickness(phi, conductivity, full) + _thickness(phi_new, conductivity, full))
            left *= np.exp(-0.5 * (infiltration + recharge) * h / slow)
            infiltration = recharge
            if sign < 0.0 and left < SPENT:
                reason = STAGNATION
        for w in range(wells.shape[0]):
            r2 = (x_new - wells[w, 0]) ** 2 + (y_new - wells[w, 1]) ** 2
            radius2 = wells[w, 3] ** 2
            if r2 <= radius2 and sign * wells[w, 2] > 0.0:
                r0 = (x - wells[w, 0]) ** 2 + (y - wells[w, 1]) ** 2
                s = min(max((r0 - radius2) / (r0 - r2), 0.0), 1.0) if r0 > r2 else 1.0  # r^2 falls evenly near a well
                x_new = x + s * (x_new - x)
                y_new = y + s * (y_new - y)
                t_new = t + s * h
                reason = WELL
                named = w
        if outside(x_new, y_new, box):
            # the share of the step at which it leaves, by bisection of the dense output
            low = 0.0
            high = 1.0
            for _ in range(45):
                s = 0.5 * (low + high)
                mx, my = within_step(s, h, rate)
                if outside(x + mx, y + my, box):
                    high = s
                else:
                    low = s
            x_new = x + mx
            y_new = y + my
            t_new = t + high * h
            reason = DRAWN_AREA
        if crawl >= 0:
            crawl = crawl + 1 if np.sqrt((x_new - x) ** 2 + (y_new - y) ** 2) < 5.0 * ASIDE else 0
            if crawl > MOST_CRAWL and reason == 0:
                reason = STAGNATION
        if (
            reason == 0
            and n_points + SUB < points.shape[0]
            and (x_new - x) ** 2 + (y_new - y) ** 2 > (LONG * size) ** 2
        ):
            for k in range(1, SUB):  # so that the chords of a long step follow its curve
                mx, my = within_step(k / SUB, h, rate)
                points[n_points, 0] = x + mx
                points[n_points, 1] = y + my
                points[n_points, 2] = t + h * k / SUB
                n_points += 1
        x, y, t, phi = x_new, y_new, t_new, phi_new
        points[n_points, 0] = x
        points[n_points, 1] = y
        points[n_points, 2] = t
        n_points += 1
        redo = 0
        if reason == 0 and t >= t_max:
            reason = TIME
        for j in range(3):
            rate[0, j] = rate[6, j]
        speed = np.sqrt(rate[0, 0] ** 2 + rate[0, 1] ** 2)
        if reason == 0 and speed * porosity * _thickness(phi, conductivity, full) <= q_rest:
            reason = STAGNATION
        reach = 0.05 * size
        for w in range(wells.shape[0]):
            gap = np.sqrt((x - wells[w, 0]) ** 2 + (y - wells[w, 1]) ** 2)
            reach = min(reach, max(0.5 * gap, 0.5 * wells[w, 3]))
        if reason == 0:
            h = min(h * grow, reach / speed, t_max - t)
    while next_mark < marks.size:
        at_marks[next_mark, 0] = x
        at_marks[next_mark, 1] = y
        next_mark += 1
    share[share.size - 1] += left
    return n_points, reason, named, n_tried


@driver
def follow_all(x, y, phi, sign, tree, medium, obstacles, t_max, tol, q_rest, marks, at_marks, points, share, result):
    """Follow particles x, y (n,); outputs as in ``follow`` with a first axis n; result (n, 4) its return values."""
    tree = held_elsewhere(tree)
    lines = ObstacleArrays(
        unowned(obstacles.segment), unowned(obstacles.line), unowned(obstacles.ending), unowned(obstacles.box)
    )
    owned_work = np.empty((2, N_WORK), np.complex128)
    work = unowned(owned_work)
    for i in range(x.size):
        result[i, 0], result[i, 1], result[i, 2], result[i, 3] = follow(
            x[i],
            y[i],
            phi[i],
            sign,
            tree,
            medium,
            lines,
            t_max,
            tol,
            q_rest,
            marks,
            at_marks[i],
            points[i],
            share[i],
            work,
        )
