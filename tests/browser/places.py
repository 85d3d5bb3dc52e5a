"""Pixels of the window, and the mapping that the tests trust: the drawn frame and Plotly's public ranges."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Place:
    """A point of the window [px]."""

    x: float
    y: float

    def __add__(self, other: tuple[float, float]) -> Place:
        return Place(self.x + other[0], self.y + other[1])

    def distance(self, other: Place) -> float:
        return math.hypot(self.x - other.x, self.y - other.y)


@dataclass(frozen=True)
class Frame:
    """The drawn frame of the plot [px] with the ranges that Plotly's public layout gives."""

    left: float
    top: float
    width: float
    height: float
    x_range: list[float]
    y_range: list[float]
    logarithmic: bool

    def place(self, x: float, y: float) -> Place:
        up = math.log10(y) if self.logarithmic else y
        across = (x - self.x_range[0]) / (self.x_range[1] - self.x_range[0])
        share = (up - self.y_range[0]) / (self.y_range[1] - self.y_range[0])
        return Place(self.left + across * self.width, self.top + (1 - share) * self.height)


def distance_to_line(place: Place, line: list[Place]) -> float:
    here = np.array([place.x, place.y])
    points = np.array([[p.x, p.y] for p in line])
    start, along = points[:-1], np.diff(points, axis=0)
    share = ((here - start) * along).sum(axis=1) / np.maximum((along**2).sum(axis=1), 1e-12)
    nearest = start + np.clip(share, 0, 1)[:, None] * along
    return float(np.hypot(*(here - nearest).T).min())
