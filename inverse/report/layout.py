"""Layout: where the parts of a fin's drawing lie on the page, in inches. Nothing is drawn here."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.report.scenes import DrawingScene

Array = NDArray[np.float64]

WIDTH = 6.4  # of every figure
LEAST_THICKNESS, MOST_THICKNESS = 0.12, 0.9
LEAST_TAPER = 0.25  # thickness from which a taper is seen
MOST_TUBE = 3.0  # radius of a tube over the fin's length up to which its axis is drawn
PLATE, JOINT, PLATE_BEYOND = 0.34, 0.08, 0.33  # width of plate and joint; how far the plate stands out
FIN_END, SECTION = 4.6, 0.72  # right end of the longest fin; size of the section
SECTION_FROM_RIGHT = 0.65  # of the section's middle
SMALL_LETTER = 0.0565  # width of small text
LETTER, LINE = 0.08, 0.16  # width and height of text
CROWDED = 26  # names on a fin before they are set smaller
STRETCHES = (2, 3, 4, 5, 8, 10, 15, 20, 30, 40, 50, 80, 100, 200, 500, 1000)


@dataclass(frozen=True, slots=True)
class Layout:
    """Where the parts of the drawing lie [in].

    `axis`: height of the fin's centre line; `left`, `right`: its ends; `scale` [in/mm]; `stretch`: how many
    times larger than its length the thickness is drawn; `dimension`: height of the dimension line;
    `tube_axis`: where the axis of an annular fin's tube lies, None where it is not drawn.
    """

    height: float
    axis: float
    left: float
    right: float
    scale: float
    stretch: int
    thickness: float
    dimension: float
    tube_axis: float | None

    @property
    def plate_half(self) -> float:
        """Half the height of the plate."""
        return self.thickness / 2 + PLATE_BEYOND

    @property
    def plate(self) -> float:
        """Width of the plate; of a tube's wall, which stays clear of its axis."""
        return PLATE if self.tube_axis is None else min(PLATE, 0.6 * (self.left - self.tube_axis))

    def half(self, scene: DrawingScene, x: Array) -> Array:
        """Half the height of the fin as it is drawn at x [mm] -> [in]."""
        found = np.interp(x, scene.x, scene.half) * (self.thickness / scene.thickness)
        return np.asarray(found, dtype=np.float64)


def names(scene: DrawingScene, *places: str) -> list[str]:
    """Return the names of the sensors on those places."""
    return [mark.name for mark in scene.marks if mark.place in places]


def on_fin(scene: DrawingScene) -> list[tuple[float, str]]:
    """Return position [mm] and name of the fin's sensors, from base to tip."""
    return sorted((m.position, m.name) for m in scene.marks if m.position is not None)


def lay_out(scene: DrawingScene) -> Layout:
    """Return the layout of a drawing: as large as the page allows, with room for every name."""
    heat = max((LETTER * len(name) for name in names(scene, "heat", "heater")), default=0.3)
    plate = max((LETTER * len(name) for name in names(scene, "plate")), default=0.0)
    left = max(0.15 + max(heat, 0.35) + 0.1 + PLATE + JOINT, plate + 0.15)
    scale = min((FIN_END - left) / scene.length, MOST_THICKNESS / scene.thickness)
    drawn_tube = scene.tube if scene.tube is not None and scene.tube <= MOST_TUBE * scene.length else None
    if drawn_tube is not None:
        scale = min(scale, (FIN_END - 0.2 - JOINT) / (scene.length + drawn_tube))
        left = max(left, 0.2 + JOINT + drawn_tube * scale)
    stretch, least = 1, LEAST_TAPER if scene.tapered else LEAST_THICKNESS
    if scene.thickness * scale < least:
        enough = (s for s in STRETCHES if s * scene.thickness * scale >= 1.5 * least)
        stretch = next(enough, STRETCHES[-1])
    thickness = max(scene.thickness * scale * stretch, 0.02)
    above = (
        max((LETTER * len(name) for _, name in on_fin(scene)), default=0.0) if len(scene.marks) > 5 else 0.2
    )
    others = LINE * max(len(names(scene, "plate")), len(names(scene, "air")) + 1)
    room = max(thickness / 2 + PLATE_BEYOND + 0.1 + others, thickness / 2 + 0.25 + above, SECTION / 2) + 0.1
    dimension = 0.36
    axis = dimension + 0.81 + max(thickness / 2, SECTION / 2 - 0.3)
    return Layout(
        height=axis + room,
        axis=axis,
        left=left,
        right=left + scene.length * scale,
        scale=scale,
        stretch=stretch,
        thickness=thickness,
        dimension=dimension,
        tube_axis=None if drawn_tube is None else left - drawn_tube * scale,
    )


def spread(wanted: Array, apart: float, low: float, high: float) -> Array:
    """Return places as near the wanted ones (ascending) as can be with `apart` between neighbours."""
    apart = min(apart, (high - low) / max(1, len(wanted) - 1))
    steps = apart * np.arange(len(wanted))
    from_left: Array = np.maximum.accumulate(wanted - steps) + steps
    from_right: Array = np.minimum.accumulate((wanted - steps)[::-1])[::-1] + steps
    places = (from_left + from_right) / 2  # each keeps the distance, so their mean does
    return np.clip(places, low + steps, high - steps[::-1])
