"""Independent ways to the same numbers: an ODE integrator restarted at every node, and arithmetic of 50 digits."""

from __future__ import annotations

import math

import mpmath
import numpy as np
from scipy.integrate import solve_ivp


def integrate_ray(depth, speed, source_depth, launch_angle, max_range):
    """The ray equations by DOP853 at rtol 1e-12, restarted at every node, or the kinks of speed would spoil it.

    Along the path length s: dx/ds = c ξ, dz/ds = c ζ, dξ/ds = 0, dζ/ds = -c'/c², dt/ds = 1/c, with ξ, ζ the slowness
    (e.g. Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics, eq. 3.23-3.24, from memory). Returns
    range, depth, travel time, path length, arrival angle, turns, surface bounces, bottom bounces.
    """
    depth, speed = np.asarray(depth, float), np.asarray(speed, float)
    gradient = np.diff(speed) / np.diff(depth)
    layer = int(np.clip(np.searchsorted(depth, source_depth, side="right") - 1, 0, gradient.size - 1))
    theta = math.radians(launch_angle)
    if theta < 0 and source_depth == depth[layer] and layer > 0:
        layer -= 1
    c0 = speed[layer] + gradient[layer] * (source_depth - depth[layer])
    state = np.array([0.0, source_depth, math.cos(theta) / c0, math.sin(theta) / c0, 0.0])
    length, turns, surface, bottom = 0.0, 0, 0, 0
    for _ in range(100_000):
        top, base = depth[layer], depth[layer + 1]
        g, c_top = gradient[layer], speed[layer]

        def slope(_, y, g=g, c_top=c_top, top=top):
            c = c_top + g * (y[1] - top)
            return [c * y[2], c * y[3], 0.0, -g / c**2, 1.0 / c]

        def leaves_up(_, y, top=top):
            return y[1] - top

        def leaves_down(_, y, base=base):
            return y[1] - base

        def arrives(_, y):
            return y[0] - max_range

        leaves_up.direction, leaves_down.direction, arrives.direction = -1, 1, 1
        events = (leaves_up, leaves_down, arrives)
        for event in events:
            event.terminal = True
        # A step longer than the way to a turning point and back would jump over the whole arc.
        sine = state[3] * (c_top + g * (state[1] - top))
        step = 0.4 * abs(sine) / (state[2] * abs(g)) if sine * g > 0 else np.inf
        run = solve_ivp(slope, (0.0, 1e7), state, method="DOP853", rtol=1e-12, atol=1e-13, events=events, max_step=step)
        turns += int(state[3] * run.y[3, -1] < 0)
        state = run.y[:, -1].copy()
        length += run.t[-1]
        if run.t_events[2].size:
            return (*state[:2], state[4], length, math.degrees(math.atan2(state[3], state[2])), turns, surface, bottom)
        if run.t_events[0].size:
            state[1] = top
            if layer == 0:
                surface, state[3] = surface + 1, abs(state[3])
            else:
                layer -= 1
        else:
            state[1] = base
            if layer == gradient.size - 1:
                bottom, state[3] = bottom + 1, -abs(state[3])
            else:
                layer += 1
    raise RuntimeError("the ray never arrived")


def precise_ray(depth, speed, source_depth, launch_angle, max_range):
    """End depth, time and the change of depth with launch angle, of a refracted or bouncing ray, in 50 digits.

    Marches layer by layer with the textbook form x = (sin θ1 - sin θ2)/(p g), t = (atanh sin θ1 - atanh sin θ2)/g.
    """
    with mpmath.workdps(50):
        m = mpmath.mpf
        z, c = [m(float(v)) for v in depth], [m(float(v)) for v in speed]
        g = [(c[i + 1] - c[i]) / (z[i + 1] - z[i]) for i in range(len(z) - 1)]

        def end(angle):
            at = m(float(source_depth))
            layer = max(i for i in range(len(g)) if z[i] <= at)
            if angle < 0 and at == z[layer] and layer:
                layer -= 1
            here = c[layer] + g[layer] * (at - z[layer])
            p, sine = mpmath.cos(angle) / here, mpmath.sin(angle)
            x, t = m(0), m(0)
            for _ in range(100_000):
                down = sine > 0 or (sine == 0 and g[layer] < 0)
                target = c[layer + 1] if down else c[layer]
                left = 1 - (p * target) ** 2
                turning = left <= 0
                after = -sine if turning else mpmath.sqrt(left) * (1 if down else -1)
                dx = (sine - after) / (p * g[layer])
                if x + dx >= max_range:
                    after = sine - p * g[layer] * (max_range - x)
                    t += (mpmath.atanh(sine) - mpmath.atanh(after)) / g[layer]
                    return z[layer] + (mpmath.sqrt(1 - after**2) / p - c[layer]) / g[layer], t
                t += (mpmath.atanh(sine) - mpmath.atanh(after)) / g[layer]
                x, sine = x + dx, after
                if turning:
                    continue
                step = 1 if down else -1
                if 0 <= layer + step < len(g):
                    layer += step
                else:
                    sine = -sine
            raise RuntimeError("the ray never arrived")

        angle = mpmath.radians(m(float(launch_angle)))
        here, time = end(angle)
        tiny = angle * m(10) ** -22
        return here, time, (end(angle + tiny)[0] - here) / tiny
