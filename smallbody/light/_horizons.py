# mypy: ignore-errors
"""Kernels: which stretches of each meridian of the sky are blocked, seen from points on the facets.

The sky of a point is cut into meridians (half-planes through the point that contain the body's z axis). Where a
half-plane cuts a facet it meets it in a segment, which blocks one interval of sin(latitude); the union of these
intervals is exact for a Sun on that meridian, whatever hangs over what.
"""

from __future__ import annotations

import math

from numba import njit

from smallbody.light._tree import _above_plane

MOST = 12  # separate blocked intervals kept on one meridian; more are merged over their narrowest gap
TOUCH = 1e-9  # intervals closer than this in sin(latitude) are one: neighbours share an edge up to round-off
BEYOND = 2.0  # end of an interval that holds the pole


@njit(cache=True, nogil=True, inline="always")
def _turn_of(x, y):
    """Azimuth of (x, y) in turns, 0 to 1, good to 4e-5 of a turn (Abramowitz & Stegun 4.4.49): only a first guess."""
    ax, ay = abs(x), abs(y)
    big, small = max(ax, ay), min(ax, ay)
    q = small / big if big > 0.0 else 0.0
    q2 = q * q
    t = q * (0.9998660 + q2 * (-0.3302995 + q2 * (0.1801410 + q2 * (-0.0851330 + q2 * 0.0208351))))
    t *= 0.15915494309189535
    if ay > ax:
        t = 0.25 - t
    if x < 0.0:
        t = 0.5 - t
    if y < 0.0:
        t = 1.0 - t
    return t


@njit(cache=True, nogil=True)
def _join(low, high, count, lo, hi):
    """Add [lo, hi] to the sorted, separate intervals low[:count], high[:count]; returns the new count."""
    first = 0
    while first < count and high[first] < lo - TOUCH:
        first += 1
    last = first
    while last < count and low[last] <= hi + TOUCH:
        lo = min(lo, low[last])
        hi = max(hi, high[last])
        last += 1
    gone = last - first
    if gone == 0:
        for i in range(count, first, -1):
            low[i] = low[i - 1]
            high[i] = high[i - 1]
        count += 1
    elif gone > 1:
        for i in range(last, count):
            low[i - gone + 1] = low[i]
            high[i - gone + 1] = high[i]
        count -= gone - 1
    low[first], high[first] = lo, hi
    if count > MOST:
        narrow = 0
        for i in range(1, count - 1):
            if low[i + 1] - high[i] < low[narrow + 1] - high[narrow]:
                narrow = i
        high[narrow] = high[narrow + 1]
        for i in range(narrow + 1, count - 1):
            low[i] = low[i + 1]
            high[i] = high[i + 1]
        count -= 1
    return count


@njit(cache=True, nogil=True)
def _block_sky(
    start,
    end,
    corners,
    normals,
    heights,
    samples,
    shifts,
    cosine,
    sine,
    slack,
    node_low,
    node_high,
    node_start,
    node_end,
    node_skip,
    nodes,
    order,
    found,
    low,
    high,
    counts,
):
    """Blocked intervals for the facets start..end.

    corners (f, 3, 3) m; normals (f, 3); heights (f,): n.x of each facet's plane, m; samples (f, s, 3): points, m;
    shifts (s,): meridian c of sample s stands at 2 pi (c + shifts[s])/columns; cosine, sine (s, c) of that angle;
    slack: what lies lower over the facet's plane than this is not an obstacle, m.
    Out: low, high (b, s, c, MOST + 2) sin(latitude), +-BEYOND where an interval holds the pole; counts (b, s, c).
    """
    columns = cosine.shape[1]
    for f in range(start, end):
        b = f - start
        n0, n1, n2 = normals[f, 0], normals[f, 1], normals[f, 2]
        d = heights[f]
        near = _above_plane(
            n0, n1, n2, d + slack, node_low, node_high, node_start, node_end, node_skip, nodes, order, corners, found
        )
        kept = 0
        for i in range(near):  # a facet whose plane has all of this one behind it cannot block: its back is turned
            t = found[i]
            if t == f:
                continue
            for k in range(3):
                x, y, z = corners[f, k, 0], corners[f, k, 1], corners[f, k, 2]
                if normals[t, 0] * x + normals[t, 1] * y + normals[t, 2] * z > heights[t] + slack:
                    found[kept] = t
                    kept += 1
                    break
        near = kept
        for s in range(samples.shape[1]):
            px, py, pz = samples[f, s, 0], samples[f, s, 1], samples[f, s, 2]
            for c in range(columns):
                counts[b, s, c] = 0
            for i in range(near):
                t = found[i]
                ax, ay, az = corners[t, 0, 0] - px, corners[t, 0, 1] - py, corners[t, 0, 2] - pz
                if normals[t, 0] * ax + normals[t, 1] * ay + normals[t, 2] * az >= 0.0:
                    continue  # its back is turned: on a closed surface the front that hides it blocks as well
                bx, by, bz = corners[t, 1, 0] - px, corners[t, 1, 1] - py, corners[t, 1, 2] - pz
                cx, cy, cz = corners[t, 2, 0] - px, corners[t, 2, 1] - py, corners[t, 2, 2] - pz
                # which meridians: azimuths relative to the first corner
                ta = _turn_of(ax, ay)
                tb = _turn_of(bx, by) - ta
                tc = _turn_of(cx, cy) - ta
                tb -= math.floor(tb + 0.5)
                tc -= math.floor(tc + 0.5)
                if abs(tb - tc) > 0.499 or abs(tb) > 0.499 or abs(tc) > 0.499:  # it may stand over the pole
                    first, last = 0, columns - 1
                else:
                    first = math.ceil((ta + min(0.0, tb, tc) - 2e-4) * columns - shifts[s])
                    last = math.floor((ta + max(0.0, tb, tc) + 2e-4) * columns - shifts[s])
                    if last - first >= columns:
                        first, last = 0, columns - 1
                for k in range(first, last + 1):
                    c = k % columns
                    ca, sa = cosine[s, c], sine[s, c]
                    da, db, dc = ca * ay - sa * ax, ca * by - sa * bx, ca * cy - sa * cx
                    up_a, up_b, up_c = da >= 0.0, db >= 0.0, dc >= 0.0
                    if up_a == up_b and up_b == up_c:
                        continue
                    xa, xb, xc = ca * ax + sa * ay, ca * bx + sa * by, ca * cx + sa * cy
                    # the corner that is alone on its side, then the two crossings
                    if up_b == up_c:
                        q = da / (da - db)
                        x1, z1 = xa + q * (xb - xa), az + q * (bz - az)
                        q = da / (da - dc)
                        x2, z2 = xa + q * (xc - xa), az + q * (cz - az)
                    elif up_a == up_c:
                        q = db / (db - da)
                        x1, z1 = xb + q * (xa - xb), bz + q * (az - bz)
                        q = db / (db - dc)
                        x2, z2 = xb + q * (xc - xb), bz + q * (cz - bz)
                    else:
                        q = dc / (dc - da)
                        x1, z1 = xc + q * (xa - xc), cz + q * (az - cz)
                        q = dc / (dc - db)
                        x2, z2 = xc + q * (xb - xc), cz + q * (bz - cz)
                    if x1 <= 0.0 and x2 <= 0.0:
                        continue  # behind: the opposite meridian's
                    # keep what rises over the facet's own plane
                    nh = n0 * ca + n1 * sa
                    h1, h2 = nh * x1 + n2 * z1, nh * x2 + n2 * z2
                    if h1 <= slack and h2 <= slack:
                        continue
                    if h1 < 0.0:
                        q = h1 / (h1 - h2)
                        x1, z1 = x1 + q * (x2 - x1), z1 + q * (z2 - z1)
                    elif h2 < 0.0:
                        q = h2 / (h2 - h1)
                        x2, z2 = x2 + q * (x1 - x2), z2 + q * (z1 - z2)
                    if x1 <= 0.0 and x2 <= 0.0:
                        continue  # what of it rises over the plane is the opposite meridian's
                    if x1 < 0.0:
                        q = x1 / (x1 - x2)
                        x1, z1 = 0.0, z1 + q * (z2 - z1)
                    elif x2 < 0.0:
                        q = x2 / (x2 - x1)
                        x2, z2 = 0.0, z2 + q * (z1 - z2)
                    r1, r2 = math.sqrt(x1 * x1 + z1 * z1), math.sqrt(x2 * x2 + z2 * z2)
                    if r1 == 0.0 or r2 == 0.0:
                        continue
                    s1, s2 = z1 / r1, z2 / r2
                    lo, hi = min(s1, s2), max(s1, s2)
                    if lo <= -1.0:  # past the pole, so that a Sun on it stands inside
                        lo = -BEYOND
                    if hi >= 1.0:
                        hi = BEYOND
                    counts[b, s, c] = _join(low[b, s, c], high[b, s, c], counts[b, s, c], lo, hi)


@njit(cache=True, nogil=True)
def _pack(counts, low, high, offsets, out_low, out_high):
    """Put the intervals behind each other; offsets (b, s, c) says where each meridian's begin."""
    for b in range(counts.shape[0]):
        for s in range(counts.shape[1]):
            for c in range(counts.shape[2]):
                at = offsets[b, s, c]
                for i in range(counts[b, s, c]):
                    out_low[at + i] = low[b, s, c, i]
                    out_high[at + i] = high[b, s, c, i]


@njit(cache=True, nogil=True)
def _share_that_sees(sin_latitude, turns, row, starts, low, high, shifts, columns):
    """Share of the samples of one row that see a Sun at this latitude and longitude; the nearest meridian answers."""
    s_count = shifts.shape[0]
    seen = 0
    for s in range(s_count):
        c = math.floor(turns * columns - shifts[s] + 0.5) % columns
        at = (row * s_count + s) * columns + c
        free = 1
        for i in range(starts[at], starts[at + 1]):
            if low[i] < sin_latitude < high[i]:
                free = 0
                break
        seen += free
    return seen / s_count


@njit(cache=True, nogil=True)
def _sees(sin_latitude, turns, rows, starts, low, high, shifts, columns, out):
    """Share of each facet's samples that see the Sun, (f, k); sin_latitude, turns (k,): longitude in turns;
    rows (f,): row or -1; starts (rows*s*columns + 1,): where a meridian's intervals begin."""
    for f in range(out.shape[0]):
        for k in range(out.shape[1]):
            out[f, k] = 1.0
            if rows[f] >= 0:
                out[f, k] = _share_that_sees(sin_latitude[k], turns[k], rows[f], starts, low, high, shifts, columns)
