"""The straightforward fit that the matching is set against: SciPy's least_squares over
solve_ivp (DOP853, rtol 1e-8) on the angles of the near lantern. Reads times, angles,
their noise and a start as JSON, prints seconds of processor time and where it ends."""
import json
import math
import sys
import time

import numpy as np
from scipy.integrate import solve_ivp
from scipy.optimize import least_squares

job = json.load(sys.stdin)
t, angle, noise = np.array(job["t"]), np.array(job["angle"]), job["noise"]
mass, arm, inertia, gravity = job["mass"], job["arm"], job["inertia"], job["gravity"]


def swing(p):
    product, gap, viscous, drag, a0, w0 = p
    k = 1e-7 * product
    weight = mass * gravity * arm

    def rate(_, y):
        a, w = y
        s, c = math.sin(a), math.cos(a)
        # The lamp's magnet points down the arm, the base's up; both dipoles.
        x, z = arm * s, arm + gap - arm * c
        dx, dz = arm * c, arm * s
        r2 = x * x + z * z
        r = math.sqrt(r2)
        n1, dn1 = s * x - c * z, c * x + s * z + s * dx - c * dz
        dr2 = 2 * (x * dx + z * dz)
        # U = k (m1.m2 / r^3 - 3 (m1.r)(m2.r) / r^5), m1.m2 = -cos a, m2.r = z
        du = s / (r2 * r) + 1.5 * c * dr2 / (r2 * r2 * r)
        du -= 3 * (dn1 * z + n1 * dz) / (r2 * r2 * r) - 7.5 * n1 * z * dr2 / (r2 * r2 * r2 * r)
        return w, (-weight * s - k * du - (viscous + drag * abs(w)) * w) / inertia

    return solve_ivp(rate, (t[0], t[-1]), (a0, w0), method="DOP853", t_eval=t, rtol=1e-8, atol=1e-8).y[0]


start = np.array(job["start"])
began = time.process_time()
found = least_squares(lambda p: (swing(p) - angle) / noise, start, x_scale=np.maximum(np.abs(start), 1e-3), method="trf")
used = time.process_time() - began
json.dump({"seconds": used, "p": found.x.tolist(), "rms": float(math.sqrt(2 * found.cost / len(t))), "evaluations": int(found.nfev)}, sys.stdout)
