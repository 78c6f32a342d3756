"""Grows invented neurons, sample by sample: somata, stems, forks that roughly keep Rall's 3/2 rule.

Nothing here was measured. The numbers only have to look like a neuron's: steps of a few micrometres,
branches that taper and wander, daughters thinner than their parent.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.random import Generator

SOMA, AXON, BASAL, APICAL = 1, 2, 3, 4
Range = tuple[float, float]


class Sample(NamedTuple):
    """One row of an SWC file; ``parent`` is an index into the list of samples, -1 at a root."""

    kind: int
    x: float
    y: float
    z: float
    radius: float
    parent: int

    @property
    def place(self) -> np.ndarray:
        """Position, um, shape (3,)."""
        return np.array([self.x, self.y, self.z])


@dataclass(frozen=True)
class Arbor:
    """How one kind of tree grows; ranges are (least, greatest), lengths and diameters in um."""

    kind: int  #: SWC type code
    stems: tuple[int, int]  #: number of stems
    stem_diameter: Range  #: where the stem leaves the soma
    tip_diameter: Range  #: where a branch ends
    between_forks: Range  #: length of a branch that forks again
    last_branch: Range  #: length of a branch that ends in a tip
    reach: Range  #: path from the soma beyond which nothing grows
    forks: int  #: most branch points between soma and tip
    share: Range  #: share of the parent's d^(3/2) that the thicker daughter takes
    step: float  #: mean distance between samples
    wander: float  #: how far the direction strays at each step
    drift: tuple[float, float, float] = (0.0, 0.0, 0.0)  #: pull on the direction at each step
    heading: tuple[float, float, float] = (0.0, 0.0, 0.0)  #: pull on the direction of a stem


class Bud(NamedTuple):
    """Where a branch is about to grow."""

    parent: int
    direction: np.ndarray
    diameter: float
    path: float
    forks: int


def draw_soma(
    rng: Generator, form: str, radius: float, centre: Sequence[float]
) -> tuple[list[Sample], dict[int, int]]:
    """Return the soma's samples and, for each kind of arbor, the sample its stems hang from."""
    x, y, z = centre
    if form == "one point":
        return [Sample(SOMA, x, y, z, radius, -1)], dict.fromkeys((AXON, BASAL, APICAL), 0)
    if form == "three-point":
        lobes = [Sample(SOMA, x, y + offset, z, radius, 0) for offset in (-radius, radius)]
        return [Sample(SOMA, x, y, z, radius, -1), *lobes], dict.fromkeys((AXON, BASAL, APICAL), 0)
    profile = zip((-1.1, -0.6, 0.0, 0.6, 1.1), (0.5, 0.85, 1.0, 0.8, 0.45), strict=True)
    lean = 0.2 * rng.normal()
    chain = [
        Sample(SOMA, x + lean * offset * radius, y + offset * radius, z, share * radius, row - 1)
        for row, (offset, share) in enumerate(profile)
    ]
    return chain, {AXON: 0, BASAL: 2, APICAL: 4}


def grow(rng: Generator, arbor: Arbor, samples: list[Sample], base: int) -> None:
    """Add an arbor to the samples, depth first, its stems hanging from sample ``base``."""
    for _ in range(int(rng.integers(*arbor.stems, endpoint=True))):
        direction = _unit(rng.normal(size=3) + arbor.heading)
        buds = [Bud(base, direction, rng.uniform(*arbor.stem_diameter), 0.0, 0)]
        while buds:
            buds.extend(_extend(rng, arbor, samples, buds.pop()))


def _extend(rng: Generator, arbor: Arbor, samples: list[Sample], bud: Bud) -> list[Bud]:
    """Grow one branch and return the buds at its end: two, or none at a tip."""
    tip = rng.uniform(*arbor.tip_diameter)
    length = rng.uniform(*arbor.between_forks)
    room = rng.uniform(*arbor.reach) - bud.path
    last = bud.forks == arbor.forks or length > room or bud.diameter < 1.3 * tip
    if last:
        length = max(min(rng.uniform(*arbor.last_branch), room), 3 * arbor.step)
    end = min(tip, bud.diameter) if last else max(tip, bud.diameter * (1 - 0.0015 * length))
    direction = _trace(rng, arbor, samples, bud, length, end)
    if last:
        return []
    return _fork(rng, arbor, Bud(len(samples) - 1, direction, end, bud.path + length, bud.forks + 1))


def _trace(
    rng: Generator, arbor: Arbor, samples: list[Sample], bud: Bud, length: float, end: float
) -> np.ndarray:
    """Add a branch's samples, tapering to diameter ``end``; return its last direction."""
    count = max(2, round(length / arbor.step))
    parent, direction = bud.parent, bud.direction
    place = samples[parent].place
    if samples[parent].kind == SOMA:  # a stem begins at the soma's surface
        place = place + direction * samples[parent].radius
    for row in range(1, count + 1):
        place = place + direction * (length / count * rng.uniform(0.7, 1.3))
        diameter = bud.diameter + (end - bud.diameter) * row / count
        radius = 0.5 * diameter * np.exp(0.03 * rng.normal())
        x, y, z = place.tolist()
        samples.append(Sample(arbor.kind, x, y, z, float(radius), parent))
        parent = len(samples) - 1
        direction = _unit(direction + arbor.wander * rng.normal(size=3) + arbor.drift)
    return direction


def _fork(rng: Generator, arbor: Arbor, bud: Bud) -> list[Bud]:
    """Return two daughters in one plane with their parent, the thicker straying less."""
    share = rng.uniform(*arbor.share)
    opening = np.radians(rng.uniform(45.0, 95.0))
    side = _unit(np.cross(bud.direction, rng.normal(size=3)))
    daughters = []
    for part, angle in ((1 - share, opening * share), (share, -opening * (1 - share))):
        scatter = np.exp(0.12 * rng.normal())
        diameter = bud.diameter * min(1.0, (part * scatter) ** (2 / 3))
        direction = np.cos(angle) * bud.direction + np.sin(angle) * side
        daughters.append(bud._replace(direction=direction, diameter=max(diameter, arbor.tip_diameter[0])))
    return daughters


def _unit(vector: np.ndarray) -> np.ndarray:
    """Return the vector at length 1."""
    unit: np.ndarray = vector / np.sqrt(vector @ vector)
    return unit


def input_resistance(samples: Sequence[Sample], R_m: float, R_i: float, spine_factor: float) -> float:
    """Return the input resistance at the soma, MOhm, taking each step for a cylinder.

    The admittance of a cable of input admittance Y at its far end is
    G (Y + G tanh l) / (G + Y tanh l), with G the admittance of the endless cable (Rall 1959,
    Exp Neurol 1:491-527). Only for inventing recordings: the package itself is exact about tapers.
    """
    admittance = np.zeros(len(samples))  # uS, looking away from the soma
    for row in range(len(samples) - 1, 0, -1):
        sample = samples[row]
        above = samples[sample.parent]
        if sample.kind == SOMA:
            admittance[sample.parent] += admittance[row]
            continue
        covered = above.radius if above.kind == SOMA else 0.0
        length = max(np.linalg.norm(sample.place - above.place) - covered, 0.0)
        factor = 1.0 if sample.kind == AXON else spine_factor
        space_constant = np.sqrt(1e4 * R_m / factor / R_i * sample.radius / 2)
        endless = 100.0 * np.pi * sample.radius**2 / (R_i * space_constant)
        fall = np.tanh(length / space_constant)
        far = admittance[row]
        admittance[sample.parent] += endless * (far + endless * fall) / (endless + far * fall)
    soma = 4 * np.pi * max(sample.radius for sample in samples if sample.kind == SOMA) ** 2
    return float(1 / (admittance[0] + 0.01 * soma / R_m))
