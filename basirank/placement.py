"""Places for labels on a picture: near what they name, over nothing that is drawn.

What is drawn is taken as a cloud of points; each label tries places on circles around its own point, the nearest
first, and takes the one that covers least. Placed labels join the cloud, so that no two lie over each other.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

Points = npt.NDArray[np.float64]

SPACING = 3.0  # of the points that stand for a line or a box [picture units]
MARGIN = 1.5  # kept free around a label [picture units]
DIRECTIONS = 24
DISTANCES = (0.0, 6.0, 12.0, 20.0, 30.0, 45.0, 65.0, 90.0, 120.0)  # of a label beyond its anchor's own radius

_ANGLES = 2 * np.pi * np.arange(DIRECTIONS) / DIRECTIONS
_UNIT = np.stack([np.cos(_ANGLES), np.sin(_ANGLES)], axis=1)

LINE_WEIGHT, BOX_WEIGHT = 4.0, 40.0
FAR_WEIGHT = (
    0.35  # cost of a unit of distance: a short bond crossed counts like a label 20 units further away
)


class Box(NamedTuple):
    """A rectangle: left, top, right and bottom edge [picture units]."""

    left: float
    top: float
    right: float
    bottom: float

    def overlaps(self, other: Box) -> bool:
        """Whether two rectangles share more than an edge."""
        return (
            self.left < other.right
            and other.left < self.right
            and self.top < other.bottom
            and other.top < self.bottom
        )


def around(boxes: Iterable[Box], margin: float = 0.0) -> Box:
    """The smallest rectangle around some others, widened by a margin.

    Examples
    --------
    >>> around([Box(0, 0, 2, 1), Box(1, -1, 3, 0)], 1)
    Box(left=-1, top=-2, right=4, bottom=2)
    """
    left, top, right, bottom = zip(*boxes, strict=True)
    return Box(min(left) - margin, min(top) - margin, max(right) + margin, max(bottom) + margin)


class Label(NamedTuple):
    """A label to be placed: the point it names, the radius kept free around that, its width and height."""

    x: float
    y: float
    radius: float
    width: float
    height: float


def place_labels(
    labels: Sequence[Label], lines: Sequence[tuple[float, float, float, float]], boxes: Sequence[Box]
) -> list[Box]:
    """Boxes for labels, in their order.

    Parameters
    ----------
    labels : sequence of Label
        What is to be placed.
    lines : sequence of (x1, y1, x2, y2)
        Lines that should not be covered [picture units].
    boxes : sequence of Box
        Rectangles that must not be covered (letters, marks).

    Examples
    --------
    >>> first, second = place_labels([Label(0, 0, 5, 20, 10)] * 2, [], [])
    >>> first.overlaps(second)
    False
    """
    cloud = [_line_points(*line) for line in lines] + [_box_points(box) for box in boxes]
    weights = [
        np.full(len(part), LINE_WEIGHT if n < len(lines) else BOX_WEIGHT) for n, part in enumerate(cloud)
    ]
    placed: list[Box] = []
    for label in labels:
        box = _best(
            label, np.concatenate([np.empty((0, 2)), *cloud]), np.concatenate([np.empty(0), *weights])
        )
        placed.append(box)
        cloud.append(_box_points(box))
        weights.append(np.full(len(cloud[-1]), 10 * BOX_WEIGHT))
    return placed


def _best(label: Label, cloud: Points, weights: Points) -> Box:
    """The cheapest place of one label; distances are tried from the nearest until no further one can be cheaper."""
    half = np.array([label.width / 2, label.height / 2])
    # the centre lies so far out that the box just clears the anchor's circle in that direction
    clear = label.radius + np.min(half / np.maximum(np.abs(_UNIT), 1e-9), axis=1)
    best, lowest = np.zeros(2), np.inf
    for distance in DISTANCES:
        reach = clear + distance
        away = FAR_WEIGHT * (reach - clear.min())
        if lowest <= away.min():
            break
        centres = np.array([label.x, label.y]) + reach[:, None] * _UNIT
        across = np.abs(cloud[None, :, 0] - centres[:, None, 0]) <= half[0] + MARGIN
        down = np.abs(cloud[None, :, 1] - centres[:, None, 1]) <= half[1] + MARGIN
        cost = (away + (across & down) @ weights).round(6)
        n = int(np.argmin(cost))
        if cost[n] < lowest:
            best, lowest = centres[n], float(cost[n])
    x, y = best
    return Box(float(x - half[0]), float(y - half[1]), float(x + half[0]), float(y + half[1]))


def _line_points(x1: float, y1: float, x2: float, y2: float) -> Points:
    count = max(2, int(np.hypot(x2 - x1, y2 - y1) / SPACING) + 1)
    share = np.linspace(0.0, 1.0, count)[:, None]
    return np.array([x1, y1]) * (1 - share) + np.array([x2, y2]) * share


def _box_points(box: Box) -> Points:
    across = np.linspace(box.left, box.right, max(2, int((box.right - box.left) / SPACING) + 2))
    down = np.linspace(box.top, box.bottom, max(2, int((box.bottom - box.top) / SPACING) + 2))
    return np.stack(np.meshgrid(across, down), axis=2).reshape(-1, 2)
