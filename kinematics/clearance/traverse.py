"""Two trees against each other: the distance at one pose, and the bound over a cell of the motion. Compiled.

Poses are of tree b in the frame of tree a: x = rotation p + shift.
"""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.clearance.cells import height
from knucklepath.kinematics.clearance.compiled import compiled
from knucklepath.kinematics.clearance.triangles import triangle_triangle

#: Pairs that wait to be looked at; depth-first, so twice the sum of the depths is plenty.
ROOM = 4096


@compiled
def separation(ca, xa, ha, cb, xb, hb, guess, enough, direction):
    """Greatest separation of two oriented boxes found over the axes of the separating-axis test, the line of centres
    and the direction ``guess``; stops at ``enough``. Negative: no separating direction among them.

    Writes the unit direction, from a to b. S. Gottschalk, M. C. Lin, D. Manocha, "OBBTree", SIGGRAPH 1996 (from
    memory); distances along the axes bound the distance from below.
    """
    dx, dy, dz = cb[0] - ca[0], cb[1] - ca[1], cb[2] - ca[2]
    best = -np.inf
    # first the caller's guess, then the line of centres: they are cheap, mostly enough, and find what lies askew to
    # all fifteen axes
    length = np.sqrt(dx * dx + dy * dy + dz * dz)
    for turn in range(2):
        if turn == 1:
            if length < 1e-12:
                continue
            nx, ny, nz = dx / length, dy / length, dz / length
        else:
            nx, ny, nz = guess[0], guess[1], guess[2]
            if nx == 0.0 and ny == 0.0 and nz == 0.0:
                continue
        gap = nx * dx + ny * dy + nz * dz
        for i in range(3):
            gap -= ha[i] * abs(nx * xa[i, 0] + ny * xa[i, 1] + nz * xa[i, 2])
            gap -= hb[i] * abs(nx * xb[i, 0] + ny * xb[i, 1] + nz * xb[i, 2])
        if gap > best:
            best = gap
            direction[0], direction[1], direction[2] = nx, ny, nz
            if best >= enough:
                return best
    c = np.empty((3, 3))
    f = np.empty((3, 3))
    ta = np.empty(3)
    tb = np.empty(3)
    for i in range(3):
        ta[i] = xa[i, 0] * dx + xa[i, 1] * dy + xa[i, 2] * dz
        tb[i] = xb[i, 0] * dx + xb[i, 1] * dy + xb[i, 2] * dz
        for j in range(3):
            c[i, j] = xa[i, 0] * xb[j, 0] + xa[i, 1] * xb[j, 1] + xa[i, 2] * xb[j, 2]
            f[i, j] = abs(c[i, j])
    for i in range(3):
        gap = abs(ta[i]) - ha[i] - (hb[0] * f[i, 0] + hb[1] * f[i, 1] + hb[2] * f[i, 2])
        if gap > best:
            best = gap
            sign = 1.0 if ta[i] >= 0.0 else -1.0
            for k in range(3):
                direction[k] = sign * xa[i, k]
        gap = abs(tb[i]) - hb[i] - (ha[0] * f[0, i] + ha[1] * f[1, i] + ha[2] * f[2, i])
        if gap > best:
            best = gap
            sign = 1.0 if tb[i] >= 0.0 else -1.0
            for k in range(3):
                direction[k] = sign * xb[i, k]
    if best >= enough:
        return best
    for i in range(3):
        i1, i2 = (i + 1) % 3, (i + 2) % 3
        for j in range(3):
            j1, j2 = (j + 1) % 3, (j + 2) % 3
            squared = 1.0 - c[i, j] * c[i, j]
            if squared < 1e-6:
                continue
            size = 1.0 / np.sqrt(squared)
            # axis = xa[i] × xb[j]
            along = ta[i2] * c[i1, j] - ta[i1] * c[i2, j]
            reach = ha[i1] * f[i2, j] + ha[i2] * f[i1, j] + hb[j1] * f[i, j2] + hb[j2] * f[i, j1]
            gap = (abs(along) - reach) * size
            if gap > best:
                best = gap
                sign = size if along >= 0.0 else -size
                direction[0] = sign * (xa[i, 1] * xb[j, 2] - xa[i, 2] * xb[j, 1])
                direction[1] = sign * (xa[i, 2] * xb[j, 0] - xa[i, 0] * xb[j, 2])
                direction[2] = sign * (xa[i, 0] * xb[j, 1] - xa[i, 1] * xb[j, 0])
    return best


@compiled
def _place(tree, node, rotation, shift, centre, axes):
    """Where a node's box of the moving tree is."""
    for i in range(3):
        centre[i] = shift[i]
        for k in range(3):
            centre[i] += rotation[i, k] * tree.centre[node, k]
        for j in range(3):
            axes[j, i] = 0.0
            for k in range(3):
                axes[j, i] += rotation[i, k] * tree.axes[node, j, k]


@compiled
def _move(corners, rotation, shift, moved):
    """Where a triangle (3, 3) of the moving tree is."""
    for v in range(3):
        for i in range(3):
            moved[v, i] = shift[i]
            for k in range(3):
                moved[v, i] += rotation[i, k] * corners[v, k]


@compiled
def _apart(s, t, guess, squared):
    """Whether two triangles keep a squared distance along one direction."""
    low, high = np.inf, -np.inf
    for v in range(3):
        along = guess[0] * s[v, 0] + guess[1] * s[v, 1] + guess[2] * s[v, 2]
        if along > high:
            high = along
        along = guess[0] * t[v, 0] + guess[1] * t[v, 1] + guess[2] * t[v, 2]
        if along < low:
            low = along
    return low > high and (low - high) * (low - high) >= squared


@compiled
def distance(a, b, rotation, shift, limit):
    """Distance of two trees at a pose, at most ``limit``; nearest points in the frame of a; 0 when they meet."""
    on_a, on_b = np.zeros(3), np.zeros(3)
    work_a, work_b, direction = np.zeros(3), np.zeros(3), np.zeros(3)
    centre, axes = np.zeros(3), np.zeros((3, 3))
    moved = np.zeros((3, 3))
    guess = np.zeros(3)
    best = limit * limit if limit < 1e150 else 1e300
    stack_a = np.empty(ROOM, dtype=np.int64)
    stack_b = np.empty(ROOM, dtype=np.int64)
    stack_gap = np.empty(ROOM)
    _place(b, 0, rotation, shift, centre, axes)
    stack_a[0], stack_b[0] = 0, 0
    stack_gap[0] = separation(a.centre[0], a.axes[0], a.half[0], centre, axes, b.half[0], guess, 1e300, direction)
    top = 1
    while top > 0:
        top -= 1
        na, nb, gap = stack_a[top], stack_b[top], stack_gap[top]
        if gap > 0.0 and gap * gap >= best:
            continue
        leaf_a, leaf_b = a.child[na] < 0, b.child[nb] < 0
        if leaf_a and leaf_b:
            for j in range(b.start[nb], b.start[nb] + b.length[nb]):
                _move(b.corners[j], rotation, shift, moved)
                for i in range(a.start[na], a.start[na] + a.length[na]):
                    if _apart(a.corners[i], moved, guess, best):
                        continue
                    found = triangle_triangle(a.corners[i], moved, best, on_a, on_b, work_a, work_b)
                    if found <= 0.0:
                        return 0.0, on_a, on_a
                    if found < best:
                        best = found
                        for k in range(3):
                            guess[k] = (on_b[k] - on_a[k]) / np.sqrt(best)
            continue
        size_a = a.half[na, 0] + a.half[na, 1] + a.half[na, 2]
        size_b = b.half[nb, 0] + b.half[nb, 1] + b.half[nb, 2]
        split_a = (not leaf_a) and (leaf_b or size_a >= size_b)
        first = top
        for k in range(2):
            ca = a.child[na] + k if split_a else na
            cb = nb if split_a else b.child[nb] + k
            _place(b, cb, rotation, shift, centre, axes)
            gap = separation(
                a.centre[ca], a.axes[ca], a.half[ca], centre, axes, b.half[cb], guess, np.sqrt(best), direction
            )
            if gap > 0.0 and gap * gap >= best:
                continue
            stack_a[top], stack_b[top], stack_gap[top] = ca, cb, gap
            top += 1
        if top - first == 2 and stack_gap[first] < stack_gap[first + 1]:
            # the nearer pair on top, so that the best falls early
            for stack in (stack_a, stack_b):
                kept = stack[first]
                stack[first] = stack[first + 1]
                stack[first + 1] = kept
            kept_gap = stack_gap[first]
            stack_gap[first] = stack_gap[first + 1]
            stack_gap[first + 1] = kept_gap
    return np.sqrt(best), on_a, on_b


@compiled
def _projected(direction, rotation, shift, b, nb):
    """Middle and reach of direction·(rotation x + shift) over a box of tree b."""
    m0 = direction[0] * rotation[0, 0] + direction[1] * rotation[1, 0] + direction[2] * rotation[2, 0]
    m1 = direction[0] * rotation[0, 1] + direction[1] * rotation[1, 1] + direction[2] * rotation[2, 1]
    m2 = direction[0] * rotation[0, 2] + direction[1] * rotation[1, 2] + direction[2] * rotation[2, 2]
    middle = direction[0] * shift[0] + direction[1] * shift[1] + direction[2] * shift[2]
    middle += m0 * b.centre[nb, 0] + m1 * b.centre[nb, 1] + m2 * b.centre[nb, 2]
    reach = 0.0
    for i in range(3):
        reach += b.half[nb, i] * abs(m0 * b.axes[nb, i, 0] + m1 * b.axes[nb, i, 1] + m2 * b.axes[nb, i, 2])
    return middle, reach


@compiled
def _box_floor(direction, a, na, b, nb, cell):
    """Least of direction·(b − a) over two boxes and the whole cell.

    Along a fixed direction a point's path lies above the bilinear surface through its values at the cell's corners
    less (Hu² max|f_uu| + Hv² max|f_vv|)/8; corners and curvatures are linear in the point, so a box's reach bounds
    them.
    """
    top = direction[0] * a.centre[na, 0] + direction[1] * a.centre[na, 1] + direction[2] * a.centre[na, 2]
    for i in range(3):
        top += a.half[na, i] * abs(
            direction[0] * a.axes[na, i, 0] + direction[1] * a.axes[na, i, 1] + direction[2] * a.axes[na, i, 2]
        )
    floor = np.inf
    most_u, most_v = 0.0, 0.0
    for k in range(5):
        if k > 0:
            middle, reach = _projected(direction, cell.rotations[k], cell.shifts[k], b, nb)
            if middle - reach < floor:
                floor = middle - reach
        middle, reach = _projected(direction, cell.bends_u[k], cell.bent_u[k], b, nb)
        most_u = max(most_u, abs(middle) + reach)
        middle, reach = _projected(direction, cell.bends_v[k], cell.bent_v[k], b, nb)
        most_v = max(most_v, abs(middle) + reach)
    curve = cell.width_u**2 * (most_u + cell.spare_u) + cell.width_v**2 * (most_v + cell.spare_v)
    return floor - top - curve / 8.0


@compiled
def _triangle_floor(direction, a, ta, b, tb, cell):
    """As the box floor, for two triangles."""
    top = -np.inf
    for v in range(3):
        along = 0.0
        for k in range(3):
            along += direction[k] * a.corners[ta, v, k]
        top = max(top, along)
    floor = np.inf
    for v in range(3):
        point = b.corners[tb, v]
        least, most_u, most_v = np.inf, 0.0, 0.0
        for k in range(5):
            if k > 0:
                least = min(least, height(direction, cell.rotations[k], cell.shifts[k], point))
            most_u = max(most_u, abs(height(direction, cell.bends_u[k], cell.bent_u[k], point)))
            most_v = max(most_v, abs(height(direction, cell.bends_v[k], cell.bent_v[k], point)))
        curve = cell.width_u**2 * (most_u + cell.spare_u) + cell.width_v**2 * (most_v + cell.spare_v)
        floor = min(floor, least - curve / 8.0)
    return floor - top


@compiled
def _prepare(direction, b, cell, rows, shifts):
    """Project the cell's corner poses on a direction, (4, 3) and (4,); returns what curvature takes off at most."""
    for k in range(4):
        shifts[k] = 0.0
        for j in range(3):
            rows[k, j] = 0.0
        for i in range(3):
            shifts[k] += direction[i] * cell.shifts[k + 1, i]
            for j in range(3):
                rows[k, j] += direction[i] * cell.rotations[k + 1, i, j]
    most_u, most_v = 0.0, 0.0
    for k in range(5):
        middle, reach = _projected(direction, cell.bends_u[k], cell.bent_u[k], b, 0)
        most_u = max(most_u, abs(middle) + reach)
        middle, reach = _projected(direction, cell.bends_v[k], cell.bent_v[k], b, 0)
        most_v = max(most_v, abs(middle) + reach)
    curve = cell.width_u**2 * (most_u + cell.spare_u) + cell.width_v**2 * (most_v + cell.spare_v)
    return curve / 8.0


@compiled
def _quick_floor(direction, rows, shifts, curve, a, na, b, nb):
    """As the box floor, along a prepared direction, with the whole tree's curvature."""
    c0, c1, c2 = b.centre[nb, 0], b.centre[nb, 1], b.centre[nb, 2]
    floor = np.inf
    for k in range(4):
        r0, r1, r2 = rows[k, 0], rows[k, 1], rows[k, 2]
        low = shifts[k] + r0 * c0 + r1 * c1 + r2 * c2
        for i in range(3):
            low -= b.half[nb, i] * abs(r0 * b.axes[nb, i, 0] + r1 * b.axes[nb, i, 1] + r2 * b.axes[nb, i, 2])
        if low < floor:
            floor = low
    d0, d1, d2 = direction[0], direction[1], direction[2]
    floor -= d0 * a.centre[na, 0] + d1 * a.centre[na, 1] + d2 * a.centre[na, 2]
    for i in range(3):
        floor -= a.half[na, i] * abs(d0 * a.axes[na, i, 0] + d1 * a.axes[na, i, 1] + d2 * a.axes[na, i, 2])
    return floor - curve


@compiled
def cell_holds(a, b, threshold, cell, hint_a, hint_b, most, direction):
    """Whether no pose of a cell brings two trees nearer than ``threshold``.

    Parameters
    ----------
    cell : see ``course.Cell``. hint_a, hint_b : a pair of nodes to try first, or −1.
    direction : (3,) where to look first; at failure, the direction along which the failing pair was tried.

    Returns
    -------
    holds; the failing pair of nodes, or −1; pairs looked at.
    """
    guess = direction.copy()
    found = np.zeros(3)
    on_a, on_b, work_a, work_b = np.zeros(3), np.zeros(3), np.zeros(3), np.zeros(3)
    centre, axes = np.zeros(3), np.zeros((3, 3))
    moved = np.zeros((3, 3))
    rotation, shift = cell.rotations[0], cell.shifts[0]
    stack_a = np.empty(ROOM, dtype=np.int64)
    stack_b = np.empty(ROOM, dtype=np.int64)
    stack_a[0], stack_b[0] = 0, 0
    top = 1
    if hint_a >= 0:
        stack_a[1], stack_b[1] = hint_a, hint_b
        top = 2
    looked = 0
    rows, row_shifts = np.zeros((4, 3)), np.zeros(4)
    guessed = guess[0] != 0.0 or guess[1] != 0.0 or guess[2] != 0.0
    curve = _prepare(guess, b, cell, rows, row_shifts)
    while top > 0:
        top -= 1
        na, nb = stack_a[top], stack_b[top]
        looked += 1
        if guessed and _quick_floor(guess, rows, row_shifts, curve, a, na, b, nb) >= threshold:
            continue
        _place(b, nb, rotation, shift, centre, axes)
        gap = separation(a.centre[na], a.axes[na], a.half[na], centre, axes, b.half[nb], guess, 1e300, found)
        if gap >= threshold and _box_floor(found, a, na, b, nb, cell) >= threshold:
            for k in range(3):
                guess[k] = found[k]
            guessed = True
            curve = _prepare(guess, b, cell, rows, row_shifts)
            continue
        leaf_a, leaf_b = a.child[na] < 0, b.child[nb] < 0
        if leaf_a and leaf_b:
            for j in range(b.start[nb], b.start[nb] + b.length[nb]):
                _move(b.corners[j], rotation, shift, moved)
                for i in range(a.start[na], a.start[na] + a.length[na]):
                    apart = np.sqrt(triangle_triangle(a.corners[i], moved, 1e300, on_a, on_b, work_a, work_b))
                    if apart > 1e-9:
                        for k in range(3):
                            found[k] = (on_b[k] - on_a[k]) / apart
                        if _triangle_floor(found, a, i, b, j, cell) >= threshold:
                            for k in range(3):
                                guess[k] = found[k]
                            guessed = True
                            curve = _prepare(guess, b, cell, rows, row_shifts)
                            continue
                    for k in range(3):
                        direction[k] = found[k]
                    return False, na, nb, looked
            continue
        if looked > most:
            for k in range(3):
                direction[k] = found[k]
            return False, na, nb, looked
        size_a = a.half[na, 0] + a.half[na, 1] + a.half[na, 2]
        size_b = b.half[nb, 0] + b.half[nb, 1] + b.half[nb, 2]
        if (not leaf_a) and (leaf_b or size_a >= size_b):
            for k in range(2):
                stack_a[top], stack_b[top] = a.child[na] + k, nb
                top += 1
        else:
            for k in range(2):
                stack_a[top], stack_b[top] = na, b.child[nb] + k
                top += 1
    return True, -1, -1, looked


@compiled
def distance_at_each(a, b, rotations, shifts):
    """Distances (n,) at poses (n, 3, 3) and (n, 3); 0 when the trees meet."""
    values = np.empty(len(rotations))
    for k in range(len(rotations)):
        values[k] = distance(a, b, rotations[k], shifts[k], 1e300)[0]
    return values
