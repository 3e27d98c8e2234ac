"""The wound as a strip in which no sap moves: heat from a line heater by finite volumes.

The heater lies in the middle of a strip |y| < width / 2 that conducts heat but carries no sap;
outside it heat moves with the sap along x. The half-plane y >= 0 is enough. Shares no formula with
the published correction or with a series solution: it is the forward side against which both can
be judged. SI units; velocities positive upwards (downstream).
"""

import math
from dataclasses import dataclass

import numpy as np
from scipy import sparse
from scipy.interpolate import CubicSpline
from scipy.sparse.linalg import splu

from sapflux.physics.heat_pulse import CM_PER_HOUR

FINEST = 2.0e-4  # m, widest cell near the heater and the strip
STEP_S = 0.5
GROWTH = 1.08  # of a cell over its neighbour nearer to the heater, outside the fine part
# Velocities of a table; the response bends most where it leaves the straight line.
NODES = np.array([2.5, 5.0, 10.0, 15.0, 20.0, 27.0, 35.0, 45.0, 60.0, 75.0, 90.0, 110.0])


@dataclass(frozen=True)
class Reading:
    """How a probe reads: spacings [m], length of the pulse [s], window after its end [s]."""

    spacing_downstream: float = 6e-3
    spacing_upstream: float = 6e-3
    pulse_length: float = 0.0
    window: tuple = (60.0, 100.0)


@dataclass(frozen=True)
class ApparentVelocity:
    """Apparent velocity against true velocity of one wound, odd in velocity: call it [m s-1].

    Beyond the last velocity solved it stays at the value there. `shares` are those by which both
    rises are smaller than of a line source at the apparent velocity.
    """

    velocity: tuple  # m s-1, from 0 up
    apparent: tuple  # m s-1
    shares: tuple  # 1

    def __call__(self, velocity):
        """Apparent velocity [m s-1] at a true one, of its shape."""
        return np.sign(velocity) * self._spline(self.apparent, -1.0)(self._within(velocity))

    def share(self, velocity):
        """Rise over that of a line source at the apparent velocity [1], at a true velocity."""
        return self._spline(self.shares, 1.0)(self._within(velocity))

    def _spline(self, values, turned):
        """Through `values` at the velocities, and `turned` times them at the negative ones."""
        known, values = np.array(self.velocity), np.array(values)
        both = np.concatenate([-known[:0:-1], known])
        return CubicSpline(both, np.concatenate([turned * values[:0:-1], values]))

    def _within(self, velocity):
        return np.minimum(np.abs(np.asarray(velocity, float)), self.velocity[-1])


def apparent_velocities(width, diffusivity, reading, velocities=NODES * CM_PER_HOUR):
    """`ApparentVelocity` of a wound of `width` [m] in wood of `diffusivity` [m2 s-1].

    By the ratio of the rises averaged over the window, (k / x) ln(down / up) with x the mean
    spacing, as loggers make it; both needles are put at that mean spacing. Between the velocities
    solved within 5e-5 up to 60 cm h-1 and 1e-4 up to 110.
    """
    mean = 0.5 * (reading.spacing_downstream + reading.spacing_upstream)
    reading = Reading(mean, mean, reading.pulse_length, reading.window)
    shown, shares = [0.0], [1.0]  # at rest a strip is wood like any other
    for velocity in velocities:
        down, up = unit_rises(velocity, width, diffusivity, reading)
        shown.append(diffusivity / mean * math.log(down / up))
        shares.append(math.sqrt(down * up) / _middle_rise(shown[-1], diffusivity, reading))
    return ApparentVelocity((0.0, *velocities.tolist()), tuple(shown), tuple(shares))


def _middle_rise(velocity, diffusivity, reading):
    """Geometric mean of both rises of a line source without a wound, for a heat of 1 K m2 [K].

    Marshall's rises at x and -x are this times exp(x V / 2k) either way. By midpoints of 0.5 s and
    of 16 parts of the pulse. Source: Marshall (1958), Plant Physiology 33.
    """
    begin, end = reading.window
    count = max(round((end - begin) / 0.5), 1)
    late = begin + (np.arange(count) + 0.5) * (end - begin) / count
    time = late[:, None] + reading.pulse_length * (np.arange(16) + 0.5) / 16
    spread = 4.0 * diffusivity * time
    square = reading.spacing_downstream**2 + (velocity * time) ** 2
    return float((np.exp(-square / spread) / (math.pi * spread)).mean())


def unit_rises(velocity, width, diffusivity, reading, finest=FINEST):
    """Rises (down, up) averaged over window and pulse, for a heat of 1 K m2: [K].

    Times q / (rho c) [K m2], heat per length over heat capacity, they are kelvin of a real pulse.
    The log of their ratio is within 1e-3 of an exact series; see `histories` for the arguments.
    """
    duration = reading.window[1] + reading.pulse_length
    seconds, *rises = histories(velocity, width, diffusivity, reading, duration, finest)
    return tuple(_mean_reading(seconds, rise, reading) for rise in rises)


def histories(velocity, width, diffusivity, reading, duration, finest=FINEST, growth=GROWTH):
    """(seconds, rise downstream, rise upstream) after an instantaneous pulse of 1 K m2: (time).

    Vertices lie at the heater and at both needles, and a face of the cells exactly at the edge of
    the strip. Crank-Nicolson in time, its first two steps as four halves of backward Euler, which
    quench the jump of the pulse; central differences in space. Cells are even out to the needles
    and to twice the strip, then grow by `growth` to where heat does not reach.

    velocity [m s-1]; width of the strip, above 0 [m]; diffusivity [m2 s-1]; duration [s];
    finest : widest cell in the even part [m].

    Source: own derivation; Rannacher (1984), Numerische Mathematik 43, for the first steps.
    """
    count = max(math.ceil(duration / STEP_S), 3)
    reach = 4.0 * math.sqrt(diffusivity * count * STEP_S)
    carried = velocity * count * STEP_S
    down = _side(reading.spacing_downstream, reach + max(carried, 0.0), finest, growth)
    up = _side(reading.spacing_upstream, reach + max(-carried, 0.0), finest, growth)
    x = np.concatenate([-up[:0:-1], down])
    odd = 2 * math.ceil((width / finest - 1.0) / 2.0) + 1  # cells across the whole strip
    height = width / odd
    even = np.arange(max(odd, math.ceil(reading.spacing_downstream / height)) + 1) * height
    y = _grown(even, reach, growth)
    rate = _rates(x, y, width, velocity, diffusivity)
    eye = sparse.identity(rate.shape[0], format="csc")
    solve = splu((eye - 0.5 * STEP_S * rate).tocsc()).solve
    forward = (eye + 0.5 * STEP_S * rate).tocsr()
    heater = (len(up) - 1) * len(y)
    places = [_index(x, reading.spacing_downstream, len(y)),
              _index(x, -reading.spacing_upstream, len(y))]  # fmt: skip
    heat = np.zeros(rate.shape[0])
    # Half of the heat belongs to the half-plane, whose first cell is half as high.
    heat[heater] = 0.5 / (_cells(x)[len(up) - 1] * _cells(y)[0])
    rises = [heat[places]]
    for step in range(count):
        heat = solve(solve(heat)) if step < 2 else solve(forward @ heat)
        rises.append(heat[places])
    rises = np.array(rises)
    return np.arange(count + 1) * STEP_S, rises[:, 0], rises[:, 1]


def _mean_reading(seconds, rise, reading):
    """Mean over the window and over the moments of the pulse, whose end is time 0."""
    begin, end = reading.window
    pulse = reading.pulse_length
    spline = CubicSpline(seconds, rise)
    once = spline.antiderivative()
    if pulse <= 0.0:
        return float((once(end) - once(begin)) / (end - begin))
    twice = spline.antiderivative(2)
    inner = twice(end + pulse) - twice(end) - twice(begin + pulse) + twice(begin)
    return float(inner / ((end - begin) * pulse))


def _side(spacing, reach, finest, growth):
    """Vertices from the heater outwards, one of them at the needle."""
    cells = math.ceil(spacing / finest - 1e-9)
    return _grown(np.arange(cells + 1) * (spacing / cells), reach, growth)


def _grown(even, reach, growth):
    vertices, cell = list(even), even[1] - even[0]
    while vertices[-1] < reach:
        cell *= growth
        vertices.append(vertices[-1] + cell)
    return np.array(vertices)


def _cells(vertices):
    """Width of the cell around each vertex; the outer ones end at their vertex."""
    faces = np.concatenate([
        vertices[:1], 0.5 * (vertices[1:] + vertices[:-1]), vertices[-1:]
    ])  # fmt: skip
    return np.diff(faces)


def _index(x, place, rows):
    return int(np.argmin(np.abs(x - place))) * rows


def _rates(x, y, width, velocity, diffusivity):
    """Matrix of the change of each vertex's rise per second; vertices run along y first."""
    faces = 0.5 * (y[1:] + y[:-1])
    flows = np.concatenate([[0.0], faces]) > 0.5 * width * (1.0 - 1e-9)  # lower face of the cell
    conduction = sparse.kron(_conduction(x), sparse.identity(len(y)))
    conduction = conduction + sparse.kron(sparse.identity(len(x)), _conduction(y))
    advection = sparse.kron(_advection(x), sparse.diags(flows.astype(float)))
    return (diffusivity * conduction - velocity * advection).tocsc()


def _conduction(vertices):
    """Second derivative on the cells of a line, nothing passing its ends."""
    through = 1.0 / np.diff(vertices)
    middle = -np.concatenate([through, [0.0]]) - np.concatenate([[0.0], through])
    flux = sparse.diags([through, middle, through], [-1, 0, 1])
    return sparse.diags(1.0 / _cells(vertices)) @ flux


def _advection(vertices):
    """First derivative on the cells of a line from the means at its faces; no heat beyond."""
    half = np.full(len(vertices) - 1, 0.5)
    middle = np.zeros(len(vertices))
    flux = sparse.diags([-half, middle, half], [-1, 0, 1])
    return sparse.diags(1.0 / _cells(vertices)) @ flux
