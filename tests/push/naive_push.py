"""The whole chain once more, so plainly that nobody could get it wrong: every facet of a convex body is turned by a
matrix at every node and place, heat is solved with all equations together, force and torque are summed as vectors in
the ecliptic frame, and the elements are worked out again from position and velocity a little later.

Only the operators of heat conduction in time are the package's (they have tests of their own); they are put in as
plain matrices.
"""

import numpy as np
from scipy.optimize import brentq

AU, SUN_W, GM, C, SIGMA = 149_597_870_700.0, 3.828e26, 1.3271244e20, 299_792_458.0, 5.670374419e-8
DAY, MYR = 86_400.0, 365.25e6 * 86_400.0


def turn(axis, angle):
    """Rotation matrix about a coordinate axis (0, 1, 2)."""
    c, s = np.cos(angle), np.sin(angle)
    i, j = (axis + 1) % 3, (axis + 2) % 3
    m = np.eye(3)
    m[i, i], m[i, j], m[j, i], m[j, j] = c, -s, s, c
    return m


def state(elements, mean_anomaly):
    """Position and velocity (ecliptic, m and m/s) for (a, e, i, node, peri), angles in rad."""
    a, e, i, node, peri = elements
    ecc = brentq(lambda x: x - e * np.sin(x) - mean_anomaly, mean_anomaly - 2, mean_anomaly + 2, xtol=1e-15)
    n = np.sqrt(GM / a**3)
    root = np.sqrt(1 - e * e)
    r = np.array([a * (np.cos(ecc) - e), a * root * np.sin(ecc), 0.0])
    v = np.array([-np.sin(ecc), root * np.cos(ecc), 0.0]) * a * n / (1 - e * np.cos(ecc))
    frame = turn(2, node) @ turn(0, i) @ turn(2, peri)
    return frame @ r, frame @ v


def elements_of(r, v):
    """(a, e, i, node, peri, mean anomaly) of a position and velocity."""
    h = np.cross(r, v)
    ecc = np.cross(v, h) / GM - r / np.linalg.norm(r)
    e = np.linalg.norm(ecc)
    a = 1 / (2 / np.linalg.norm(r) - v @ v / GM)
    i = np.arctan2(np.hypot(h[0], h[1]), h[2])
    node = np.arctan2(h[0], -h[1])
    line = np.array([np.cos(node), np.sin(node), 0.0])
    normal = h / np.linalg.norm(h)
    peri = np.arctan2(ecc @ np.cross(normal, line), ecc @ line)
    f = np.arctan2(r @ np.cross(normal, ecc), r @ ecc)
    big = 2 * np.arctan2(np.sqrt(1 - e) * np.sin(f / 2), np.sqrt(1 + e) * np.cos(f / 2))
    return np.array([a, e, i, node, peri, big - e * np.sin(big)])


def naive_element_rates(elements, mean_anomalies, weights, acceleration):
    """Mean rates of the six elements, SI, from what a kick does to position and velocity at every place.

    acceleration (p, 3), ecliptic frame
    """
    total = np.zeros(6)
    for m, w, push in zip(mean_anomalies, weights, acceleration):
        r, v = state(elements, m)
        speed = np.linalg.norm(v)
        kick = push / np.linalg.norm(push) * 1e-5 * speed if push.any() else push
        change = elements_of(r, v + kick) - elements_of(r, v - kick)
        change[3:] = (change[3:] + np.pi) % (2 * np.pi) - np.pi
        if push.any():
            total += w * change / (2e-5 * speed) * np.linalg.norm(push)
    return total


def equal_light_places(e, count):
    """Mean anomalies of equal steps of true anomaly, and their shares of time."""
    f = 2 * np.pi * np.arange(count) / count
    big = 2 * np.arctan2(np.sqrt(1 - e) * np.sin(f / 2), np.sqrt(1 + e) * np.cos(f / 2))
    m = big - e * np.sin(big)
    share = 1 / (1 + e * np.cos(f)) ** 2
    return np.mod(m, 2 * np.pi), share / share.sum()


def naive_chain(
    shape, elements, pole, omega, mass, bond_albedo, emissivity, gamma, light, heat, season, nodes, fine=2048
):
    """Rates of (a, e, i, node, peri, M) and of (omega, obliquity, azimuth), all SI and rad, of a convex body.

    pole : unit vector, ecliptic
    light, heat : (mean anomalies, shares of time) of the places where light is summed and heat is solved
    season : conduction over the orbit as a matrix on daily means, for unit inertia
    nodes : of a rotation, for heat; light is summed at `fine` of them. Heat is solved at half of them as well, and a
        third of the change added: errors go with the square of the step.
    """
    normals, areas, centres = np.asarray(shape.normals), np.asarray(shape.areas_m2), np.asarray(shape.centroids_m)
    inertia = mass / shape.mass.volume_m3 * shape.mass.inertia_m5[2, 2]

    def sun(m):
        r, _ = state(elements, m)
        return -r / np.linalg.norm(r), SUN_W / (4 * np.pi * (r @ r))

    def azimuth(u):
        x = np.cross(pole, [0.3, 0.5, 0.7])
        x /= np.linalg.norm(x)
        return np.arctan2(u @ np.cross(pole, x), u @ x)

    def turned(u, count):
        """Normals and centres (count, f, 3) through a rotation; it begins with the Sun over longitude 0."""
        x = u - (u @ pole) * pole
        x /= np.linalg.norm(x)
        y = np.cross(pole, x)
        angle = 2 * np.pi * np.arange(count)[:, None] / count
        along, across = np.cos(angle) * x + np.sin(angle) * y, np.cos(angle) * y - np.sin(angle) * x
        frame = np.stack([along, across, np.broadcast_to(pole, along.shape)], axis=1)
        return normals @ frame, centres @ frame

    def summed(pressures, n, r):
        """Mean over the nodes of sum -p n dA and of its torque; pressures (count, f)."""
        force = -np.einsum("kf,f,kfx->x", pressures, areas, n) / len(n)
        return force, -np.einsum("kf,f,kfx->x", pressures, areas, np.cross(r, n)) / len(n)

    def of_light():
        """Rates and torque of light: as it arrives, and given back at once."""
        pushes, torque = [], np.zeros(3)
        for m, w in zip(*light):
            u, flux = sun(m)
            n, r = turned(u, fine)
            mu = np.maximum(0, n @ u)
            force, twist = summed((2 / 3) * flux / C * mu, n, r)  # scattered, or absorbed and emitted
            force = force - flux / C * np.einsum("kf,f->", mu, areas) / fine * u
            twist = twist - np.cross(np.einsum("kf,f,kfx->x", flux / C * mu, areas, r) / fine, u)
            pushes.append(force / mass)
            torque += w * twist
        return naive_element_rates(elements, *light, np.array(pushes)), torque

    def of_heat(nodes):
        """Rates and torque of what is emitted later than it is absorbed; absorbed and excess power, W/m2."""
        p, f = len(heat[0]), len(areas)
        absorbed = np.empty((p, nodes, f))
        places = []
        matrix = np.zeros((p * nodes, p * nodes))
        for k, m in enumerate(heat[0]):
            u, flux = sun(m)
            n, r = turned(u, nodes)
            places.append((n, r))
            absorbed[k] = (1 - bond_albedo) * flux * np.maximum(0, n @ u)
            # how fast the Sun moves in longitude over the ground: rotation less its own way round the pole, unless that
            # pole lies so low that the Sun jumps across it
            step = 1e-5
            before, after = (azimuth(sun(m + s)[0]) for s in (-step, step))
            moved = (after - before + np.pi) % (2 * np.pi) - np.pi
            normal = np.cross(*state(elements, 0.0))
            lies = abs(pole @ normal) < 0.5 * np.linalg.norm(normal)
            rate = omega - (0.0 if lies else moved / (2 * step) * np.sqrt(GM / elements[0] ** 3))
            # convolution quadrature as a plain Fourier sum: the symbol 3/2 - 2 z + z^2/2, square root of it over dt
            q = np.arange(nodes)
            z = np.exp(-2j * np.pi * q / nodes)
            symbol = np.sqrt((1.5 - 2 * z + z * z / 2) * nodes * rate / (2 * np.pi))
            symbol[0] = 0
            weight = gamma * np.real(np.exp(2j * np.pi * np.outer(q, q) / nodes) @ symbol) / nodes
            rows = slice(k * nodes, (k + 1) * nodes)
            matrix[rows, rows] += weight[(q[:, None] - q[None, :]) % nodes]
            for j in range(p):
                matrix[rows, j * nodes : (j + 1) * nodes] += gamma * season[k, j] / nodes
        excess = np.empty_like(absorbed)
        es = emissivity * SIGMA
        for one in range(f):
            light_in = absorbed[..., one].ravel()
            t = np.full(p * nodes, (light_in.max() / es) ** 0.25)
            for _ in range(100):
                change = np.linalg.solve(matrix + np.diag(4 * es * t**3), matrix @ t + es * t**4 - light_in)
                t = np.maximum(t - change, 0.3 * t)
                if np.abs(change).max() < 1e-10:
                    break
            excess[..., one] = (es * t**4 - light_in).reshape(p, nodes)
        pushes, torque = [], np.zeros(3)
        for w, (n, r), x in zip(heat[1], places, excess):
            force, twist = summed((2 / 3) / C * x, n, r)
            pushes.append(force / mass)
            torque += w * twist
        return naive_element_rates(elements, *heat, np.array(pushes)), torque, absorbed, excess

    rates, torque = of_light()
    late, late_torque, absorbed, excess = of_heat(nodes)
    coarse, coarse_torque, _, _ = of_heat(nodes // 2)
    rates = rates + late + (late - coarse) / 3
    torque = torque + late_torque + (late_torque - coarse_torque) / 3

    r, v = state(elements, 0.0)
    normal = np.cross(r, v) / np.linalg.norm(np.cross(r, v))
    ahead = np.array([r / np.linalg.norm(r), np.cross(normal, r / np.linalg.norm(r))])

    def angles(s):
        s = s / np.linalg.norm(s)
        return np.array([np.arccos(s @ normal), np.arctan2(s @ ahead[1], s @ ahead[0])])

    across = torque - (torque @ pole) * pole
    kick = across / np.linalg.norm(across) * 1e-6
    wander = (angles(pole + kick) - angles(pole - kick)) / 2e-6 * np.linalg.norm(across) / (inertia * omega)
    return rates, np.array([torque @ pole / inertia, *wander]), absorbed, excess
