"""The distance of two triangles with its nearest points, compiled. Knows no tree and no motion.

Segment to segment and point to triangle after C. Ericson, *Real-Time Collision Detection*, 2005 (from memory), with
guards for triangles and edges without length.
"""

from __future__ import annotations

from knucklepath.kinematics.clearance.compiled import compiled

#: Squared lengths below this, mm², have no direction.
NO_LENGTH = 1e-24


@compiled
def _clamp(value):
    return 0.0 if value < 0.0 else (1.0 if value > 1.0 else value)


@compiled
def segment_segment(p, q, r, s, on_a, on_b):
    """Squared distance of segments pq and rs; writes the nearest points."""
    d1x, d1y, d1z = q[0] - p[0], q[1] - p[1], q[2] - p[2]
    d2x, d2y, d2z = s[0] - r[0], s[1] - r[1], s[2] - r[2]
    rx, ry, rz = p[0] - r[0], p[1] - r[1], p[2] - r[2]
    a = d1x * d1x + d1y * d1y + d1z * d1z
    e = d2x * d2x + d2y * d2y + d2z * d2z
    f = d2x * rx + d2y * ry + d2z * rz
    if a <= NO_LENGTH and e <= NO_LENGTH:
        t1, t2 = 0.0, 0.0
    elif a <= NO_LENGTH:
        t1, t2 = 0.0, _clamp(f / e)
    else:
        c = d1x * rx + d1y * ry + d1z * rz
        if e <= NO_LENGTH:
            t1, t2 = _clamp(-c / a), 0.0
        else:
            b = d1x * d2x + d1y * d2y + d1z * d2z
            denominator = a * e - b * b
            t1 = _clamp((b * f - c * e) / denominator) if denominator > 1e-14 * a * e else 0.0
            t2 = (b * t1 + f) / e
            if t2 < 0.0:
                t2, t1 = 0.0, _clamp(-c / a)
            elif t2 > 1.0:
                t2, t1 = 1.0, _clamp((b - c) / a)
    squared = 0.0
    for k in range(3):
        on_a[k] = p[k] + t1 * (q[k] - p[k])
        on_b[k] = r[k] + t2 * (s[k] - r[k])
        squared += (on_a[k] - on_b[k]) ** 2
    return squared


@compiled
def point_triangle(p, a, b, c, on):
    """Squared distance of a point from triangle abc; writes the nearest point of the triangle."""
    abx, aby, abz = b[0] - a[0], b[1] - a[1], b[2] - a[2]
    acx, acy, acz = c[0] - a[0], c[1] - a[1], c[2] - a[2]
    apx, apy, apz = p[0] - a[0], p[1] - a[1], p[2] - a[2]
    d1 = abx * apx + aby * apy + abz * apz
    d2 = acx * apx + acy * apy + acz * apz
    v, w = 0.0, 0.0
    if d1 <= 0.0 and d2 <= 0.0:
        pass
    else:
        bpx, bpy, bpz = p[0] - b[0], p[1] - b[1], p[2] - b[2]
        d3 = abx * bpx + aby * bpy + abz * bpz
        d4 = acx * bpx + acy * bpy + acz * bpz
        if d3 >= 0.0 and d4 <= d3:
            v = 1.0
        else:
            vc = d1 * d4 - d3 * d2
            if vc <= 0.0 and d1 >= 0.0 and d3 <= 0.0:
                v = d1 / (d1 - d3) if d1 > d3 else 0.0
            else:
                cpx, cpy, cpz = p[0] - c[0], p[1] - c[1], p[2] - c[2]
                d5 = abx * cpx + aby * cpy + abz * cpz
                d6 = acx * cpx + acy * cpy + acz * cpz
                if d6 >= 0.0 and d5 <= d6:
                    w = 1.0
                else:
                    vb = d5 * d2 - d1 * d6
                    if vb <= 0.0 and d2 >= 0.0 and d6 <= 0.0:
                        w = d2 / (d2 - d6) if d2 > d6 else 0.0
                    else:
                        va = d3 * d6 - d5 * d4
                        if va <= 0.0 and (d4 - d3) >= 0.0 and (d5 - d6) >= 0.0:
                            total = (d4 - d3) + (d5 - d6)
                            w = (d4 - d3) / total if total > 0.0 else 0.0
                            v = 1.0 - w
                        else:
                            total = va + vb + vc
                            if total > 0.0:
                                v, w = vb / total, vc / total
    squared = 0.0
    for k in range(3):
        on[k] = a[k] + v * (b[k] - a[k]) + w * (c[k] - a[k])
        squared += (p[k] - on[k]) ** 2
    return squared


@compiled
def _edge_crosses(p, q, a, b, c, on):
    """True when segment pq passes through triangle abc; writes where."""
    e1x, e1y, e1z = b[0] - a[0], b[1] - a[1], b[2] - a[2]
    e2x, e2y, e2z = c[0] - a[0], c[1] - a[1], c[2] - a[2]
    nx, ny, nz = e1y * e2z - e1z * e2y, e1z * e2x - e1x * e2z, e1x * e2y - e1y * e2x
    area = nx * nx + ny * ny + nz * nz
    if area <= NO_LENGTH:
        return False
    hp = nx * (p[0] - a[0]) + ny * (p[1] - a[1]) + nz * (p[2] - a[2])
    hq = nx * (q[0] - a[0]) + ny * (q[1] - a[1]) + nz * (q[2] - a[2])
    if hp * hq > 0.0 or hp == hq:
        return False
    t = hp / (hp - hq)
    x = p[0] + t * (q[0] - p[0]) - a[0]
    y = p[1] + t * (q[1] - p[1]) - a[1]
    z = p[2] + t * (q[2] - p[2]) - a[2]
    # barycentric coordinates by areas
    cx, cy, cz = y * e2z - z * e2y, z * e2x - x * e2z, x * e2y - y * e2x
    v = (cx * nx + cy * ny + cz * nz) / area
    cx, cy, cz = e1y * z - e1z * y, e1z * x - e1x * z, e1x * y - e1y * x
    w = (cx * nx + cy * ny + cz * nz) / area
    if v < 0.0 or w < 0.0 or v + w > 1.0:
        return False
    on[0], on[1], on[2] = x + a[0], y + a[1], z + a[2]
    return True


@compiled
def triangle_triangle(s, t, best, on_a, on_b, work_a, work_b):
    """Squared distance of triangles s and t (3, 3); ``best`` if not below it. Writes the nearest points."""
    for i in range(3):
        j = (i + 1) % 3
        if _edge_crosses(s[i], s[j], t[0], t[1], t[2], work_a) or _edge_crosses(t[i], t[j], s[0], s[1], s[2], work_a):
            for k in range(3):
                on_a[k] = work_a[k]
                on_b[k] = work_a[k]
            return 0.0
    for i in range(3):
        squared = point_triangle(s[i], t[0], t[1], t[2], work_b)
        if squared < best:
            best = squared
            for k in range(3):
                on_a[k] = s[i, k]
                on_b[k] = work_b[k]
        squared = point_triangle(t[i], s[0], s[1], s[2], work_a)
        if squared < best:
            best = squared
            for k in range(3):
                on_a[k] = work_a[k]
                on_b[k] = t[i, k]
        for j in range(3):
            squared = segment_segment(s[i], s[(i + 1) % 3], t[j], t[(j + 1) % 3], work_a, work_b)
            if squared < best:
                best = squared
                for k in range(3):
                    on_a[k] = work_a[k]
                    on_b[k] = work_b[k]
    return best
