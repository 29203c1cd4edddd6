"""Slow twin of the catalogue: every term written as loops over layers and interfaces.

Taken from the equations as printed in the documentation, in physical unknowns, sharing no line with
the package. A state is a dict of lists: u, v, pi by layer, w by interface 0..n with w = 0 at both
ends, theta by layer (Lorenz) or by interface with the two ends unused.
"""

import cmath
import math

import numpy as np

G, CP = 9.80665, 3.5 * 8314.32 / 28.9644


class Twin:
    def __init__(self, column, air, kappa):
        self.col, self.air, self.kappa = column, air, kappa
        self.z = [float(x) for x in column.levels.interfaces_m]
        self.n = len(self.z) - 1
        self.zc = [(self.z[j] + self.z[j + 1]) / 2 for j in range(self.n)]
        self.dz = [self.z[j + 1] - self.z[j] for j in range(self.n)]
        self.lorenz = column.staggering == "lorenz"
        self.h = column.horizontal

    # ------------------------------------------------------------------ geometry of the unknowns
    def dzf(self, f):
        return self.zc[f] - self.zc[f - 1]

    def zeros(self):
        n = self.n
        theta = n if self.lorenz else n + 1
        return {
            "u": [0j] * n,
            "v": [0j] * n,
            "pi": [0j] * n,
            "w": [0j] * (n + 1),
            "theta": [0j] * theta,
        }

    def inside(self, field):
        """Indices of the unknowns of a field."""
        if field == "w" or (field == "theta" and not self.lorenz):
            return range(1, self.n)
        return range(self.n)

    def by_interface(self, field):
        return field == "w" or (field == "theta" and not self.lorenz)

    def fields(self):
        return (
            ("u", "v", "w", "theta", "pi") if self.col.coriolis_per_s else ("u", "w", "theta", "pi")
        )

    # ------------------------------------------------------------------ the horizontal direction
    def ikx(self):
        dx, k = self.h.grid_spacing_m, self.kappa
        one = {
            "staggered": lambda: (cmath.exp(1j * k * dx / 2) - cmath.exp(-1j * k * dx / 2)) / dx,
            "centred-2": lambda: (cmath.exp(1j * k * dx) - cmath.exp(-1j * k * dx)) / (2 * dx),
            "centred-4": lambda: (
                (
                    8 * (cmath.exp(1j * k * dx) - cmath.exp(-1j * k * dx))
                    - (cmath.exp(2j * k * dx) - cmath.exp(-2j * k * dx))
                )
                / (12 * dx)
            ),
            "exact": lambda: 1j * k,
            "given": lambda: 1j * self.h.largest_gradient_per_m * k * dx / math.pi,
        }[self.h.gradient]()
        return math.sqrt(self.h.directions) * one

    def slope(self, f):
        average = math.cos(self.kappa * self.h.grid_spacing_m / 2)
        return float(self.col.slope_f[f]) * (average if self.h.gradient == "staggered" else 1.0)

    def along(self, wind):
        """Symbol of U d/dx summed over the directions, from the stencil on a line of points."""
        dx, k = self.h.grid_spacing_m, self.kappa
        weights = {
            "centred-2": {-1: -1 / 2, 1: 1 / 2},
            "centred-4": {-2: 1 / 12, -1: -8 / 12, 1: 8 / 12, 2: -1 / 12},
            "centred-6": {-3: -1 / 60, -2: 9 / 60, -1: -45 / 60, 1: 45 / 60, 2: -9 / 60, 3: 1 / 60},
            "upwind-3": {-2: 1 / 6, -1: -1.0, 0: 1 / 2, 1: 1 / 3},
            "upwind-5": {-3: -2 / 60, -2: 15 / 60, -1: -1.0, 0: 20 / 60, 1: 30 / 60, 2: -3 / 60},
        }[self.h.advection]
        component = wind / math.sqrt(self.h.directions)
        side = 1 if component >= 0 else -1
        one = side * sum(c * cmath.exp(1j * side * o * k * dx) for o, c in weights.items()) / dx
        return self.h.directions * component * one

    # ------------------------------------------------------------------ the air
    def rt_f(self, f):
        return float(self.air.density_f[f] * self.air.theta_f[f])

    def mass(self, j):
        return float(self.air.density_c[j] * self.air.theta_c[j]) * self.dz[j]

    def stiff(self, j):
        return float(self.air.sound_speed_squared_c[j]) / (CP * float(self.air.theta_c[j]))

    # ------------------------------------------------------------------ the terms
    def vertical_pressure_gradient(self, q, r):
        for f in range(1, self.n):
            r["w"][f] = -CP * self.air.theta_f[f] * (q["pi"][f] - q["pi"][f - 1]) / self.dzf(f)

    def divergence3(self, q, j):
        up = self.rt_f(j + 1) * q["w"][j + 1] if j + 1 < self.n else 0
        down = self.rt_f(j) * q["w"][j] if j > 0 else 0
        return (up - down) / self.mass(j)

    def vertical_divergence(self, q, r):
        for j in range(self.n):
            r["pi"][j] = -self.stiff(j) * self.divergence3(q, j)

    def buoyancy(self, q, r):
        for f in range(1, self.n):
            if self.lorenz:
                low = self.dz[f - 1] / 2 * q["theta"][f - 1] / self.air.theta_c[f - 1]
                high = self.dz[f] / 2 * q["theta"][f] / self.air.theta_c[f]
                r["w"][f] = G * (low + high) / self.dzf(f)
            else:
                r["w"][f] = G * q["theta"][f] / self.air.theta_f[f]

    def stratification(self, q, r):
        air = self.air
        if self.lorenz:
            for j in range(self.n):
                gradient = (air.theta_f[j + 1] - air.theta_f[j]) / self.dz[j]
                flux = air.density_f[j] * q["w"][j] + air.density_f[j + 1] * q["w"][j + 1]
                r["theta"][j] = -gradient * flux / (2 * air.density_c[j])
        else:
            for f in range(1, self.n):
                gradient = (air.theta_c[f] - air.theta_c[f - 1]) / self.dzf(f)
                r["theta"][f] = -q["w"][f] * gradient

    def horizontal_pressure_gradient(self, q, r):
        for j in range(self.n):
            r["u"][j] = -self.ikx() * CP * self.air.theta_c[j] * q["pi"][j]

    def horizontal_divergence(self, q, r):
        for j in range(self.n):
            r["pi"][j] = -self.stiff(j) * self.ikx() * q["u"][j]

    def twice(self, j):
        return 2 if j == 0 and self.col.lowest_slope_gradient == "full" else 1

    def slope_pressure_gradient(self, q, r):
        for j in range(self.n):
            total = 0
            for f in (j, j + 1):
                if 0 < f < self.n:
                    total += self.slope(f) * self.rt_f(f) * (q["pi"][f] - q["pi"][f - 1]) / 2
            r["u"][j] = CP * self.air.theta_c[j] * total / self.mass(j) * self.twice(j)

    def slope_divergence(self, q, r):
        def flux(f):
            if not 0 < f < self.n:
                return 0
            mean = (q["u"][f - 1] * self.twice(f - 1) + q["u"][f] * self.twice(f)) / 2
            return self.rt_f(f) * self.slope(f) * mean

        for j in range(self.n):
            r["pi"][j] = self.stiff(j) * (flux(j + 1) - flux(j)) / self.mass(j)

    def horizontal_advection(self, q, r):
        for field in self.fields():
            for i in self.inside(field):
                at = self.by_interface(field)
                wind = self.air.wind_f[i] if at else self.air.wind_c[i]
                r[field][i] = -self.along(float(wind)) * q[field][i]

    def shear(self, q, r):
        for j in range(self.n):
            gradient = (self.air.wind_f[j + 1] - self.air.wind_f[j]) / self.dz[j]
            r["u"][j] = -gradient * (q["w"][j] + q["w"][j + 1]) / 2

    def vertical_advection(self, q, r):
        for field in self.fields():
            for i in self.inside(field):
                if self.by_interface(field):
                    speed = float(self.air.updraft_f[i])
                else:
                    speed = float(self.air.updraft_c[i])
                r[field][i] = -speed * self.gradient_at(field, q[field], i, speed)

    def gradient_at(self, field, values, i, speed):
        """d/dz by fitting a polynomial through the scheme's points."""
        if field == "w":  # ground and lid are known points
            points = {f: (self.z[f], values[f]) for f in range(self.n + 1)}
            low, high = 0, self.n
        elif self.by_interface(field):
            points = {f: (self.z[f], values[f]) for f in range(1, self.n)}
            low, high = 1, self.n - 1
            points[0] = (self.z[1] - self.dz[0], values[1])
            points[self.n] = (self.z[self.n - 1] + self.dz[-1], values[self.n - 1])
        else:
            points = {j: (self.zc[j], values[j]) for j in range(self.n)}
            low, high = 0, self.n - 1
            points[-1] = (self.zc[0] - self.dz[0], values[0])
            points[self.n] = (self.zc[-1] + self.dz[-1], values[-1])
        up = -1 if speed >= 0 else 1
        scheme = self.col.vertical_advection
        third = [i + 2 * up, i + up, i, i - up]
        if scheme == "centred":
            chosen = [i - 1, i, i + 1]
        elif scheme == "upwind-3" and all(low <= k <= high for k in third):
            chosen = third
        else:
            chosen = [i, i + up]
        scale = max(abs(points[k][0] - points[i][0]) for k in chosen)
        x = np.array([(points[k][0] - points[i][0]) / scale for k in chosen])
        y = np.array([points[k][1] for k in chosen])
        return np.linalg.solve(np.vander(x, increasing=True), y)[1] / scale

    def vertical_diffusion(self, q, r):
        air, col = self.air, self.col
        for field in ("u", "v", "w", "theta"):
            if field not in self.fields():
                continue
            for i in self.inside(field):
                if self.by_interface(field):

                    def flux(j, field=field):  # through the middle of layer j
                        if field == "theta" and j in (0, self.n - 1):
                            return 0
                        step = q[field][j + 1] - q[field][j]
                        return air.density_c[j] * col.diffusivity_c[j] * step / self.dz[j]

                    up, down, inertia = flux(i), flux(i - 1), air.density_f[i] * self.dzf(i)
                else:

                    def flux(f, field=field):  # through interface f
                        if not 0 < f < self.n:
                            return 0
                        step = q[field][f] - q[field][f - 1]
                        return air.density_f[f] * col.diffusivity_f[f] * step / self.dzf(f)

                    up, down, inertia = flux(i + 1), flux(i), air.density_c[i] * self.dz[i]
                r[field][i] = (up - down) / inertia

    def upper_damping(self, q, r):
        for f in range(1, self.n):
            r["w"][f] = -self.col.upper_damping_f[f] * q["w"][f]

    def divergence_damping(self, q, r):
        for j in range(self.n):
            spread = self.ikx() * q["u"][j]
            if self.col.divergence_damping_form == "three-dimensional":
                spread += self.divergence3(q, j)
            r["u"][j] = self.col.divergence_damping * self.ikx() * spread

    def horizontal_diffusion(self, q, r):
        dx, k = self.h.grid_spacing_m, self.kappa
        second = k * k if self.h.gradient == "exact" else 4 / dx**2 * math.sin(k * dx / 2) ** 2
        rate = (
            self.col.horizontal_diffusion
            * (self.h.directions * second) ** self.col.horizontal_diffusion_order
        )
        for field in self.fields():
            for i in self.inside(field):
                r[field][i] = -rate * q[field][i]

    def rotation(self, q, r):
        if self.col.coriolis_per_s:
            for j in range(self.n):
                r["u"][j] = self.col.coriolis_per_s * q["v"][j]
                r["v"][j] = -self.col.coriolis_per_s * q["u"][j]

    # ------------------------------------------------------------------ between loops and vectors
    def places(self, layout):
        """(field, index) of every unknown in the stored order."""
        found = {}
        for field in self.fields():
            for place, i in zip(layout.places(field), self.inside(field), strict=True):
                found[int(place)] = (field, i)
        return [found[k] for k in range(layout.size)]

    def matrix(self, name, layout):
        """The term in stored unknowns, column by column through unit states."""
        order, size = self.places(layout), layout.size
        term = getattr(self, name.replace("-", "_"))
        full = np.zeros((size, size), dtype=complex)
        for k, (field, i) in enumerate(order):
            state, tendency = self.zeros(), self.zeros()
            state[field][i] = 1.0
            term(state, tendency)
            full[:, k] = [tendency[f][m] for f, m in order]
        phase = [1j if field in ("u", "v") else 1.0 for field, _ in order]
        return full * np.array(phase)[None, :] / np.array(phase)[:, None]

    def energy(self, stored, layout):
        """E of a state in stored unknowns."""
        air, n = self.air, self.n
        q = self.zeros()
        for value, (field, i) in zip(stored, self.places(layout), strict=True):
            q[field][i] = value
        total = 0.0
        for j in range(n):
            stiffness = (CP * air.theta_c[j]) ** 2 / air.sound_speed_squared_c[j]
            kinetic = abs(q["u"][j]) ** 2 + abs(q["v"][j]) ** 2
            total += self.dz[j] * air.density_c[j] * (kinetic + stiffness * abs(q["pi"][j]) ** 2)
        for f in range(1, n):
            total += self.dzf(f) * air.density_f[f] * abs(q["w"][f]) ** 2
        for i in self.inside("theta"):
            if self.lorenz:
                gradient = (air.theta_f[i + 1] - air.theta_f[i]) / self.dz[i]
                mass, theta = self.dz[i] * air.density_c[i], air.theta_c[i]
            else:
                gradient = (air.theta_c[i] - air.theta_c[i - 1]) / self.dzf(i)
                mass, theta = self.dzf(i) * air.density_f[i], air.theta_f[i]
            total += mass * G / (gradient * theta) * abs(q["theta"][i]) ** 2
        return total / 2
