"""Rules on beams, single elements and the planes their light is looked at in."""

import math
from collections.abc import Iterator

from doe import sampling, units
from doe.config.fit import Spots, Trouble
from doe.config.schema import Beam, Element, Plane
from doe.config.target import NoTarget

FWHM_TO_DIAMETER = math.sqrt(2 / math.log(2))  # 1/e^2 diameter over FWHM of a Gaussian, closed form

MOST_STEP = math.pi / 8  # rad; a pixel's sinc then takes 1.3 % off the light at the edge
SQUARE = 1e-6  # relative: rounding of a size


def element(element: Element, target: Spots) -> Iterator[Trouble]:
    """A unit cell has a period and something to aim at; a single element a size and neither."""
    if element.kind == "single":
        if element.size is None:
            yield Trouble("element.size", "a single element needs its size", "a length", "add it")
        elif abs(pitches(element)[0] / pitches(element)[1] - 1) > SQUARE:
            yield Trouble(
                "element.size", "the pixels are not square", "size / pixels alike", "mend one"
            )
        if element.period is not None:
            yield Trouble(
                "element.period", "a single element has no period", "`size`", "give `size` instead"
            )
    elif element.size is not None:
        yield Trouble("element.size", "a unit cell has a period", "`period`", "remove `size`")
    if (element.kind == "single") != isinstance(target, NoTarget):
        yield Trouble(
            "target.kind",
            f'this kind does not go with `element.kind = "{element.kind}"`',
            'spots with a unit cell, "none" with a single element',
            "change one of the two",
        )


def beam(beam: Beam) -> Iterator[Trouble]:
    """One statement of the size, and a file where the profile says so."""
    given = [name for name in ("diameter", "fwhm") if getattr(beam, name) is not None]
    if len(given) != 1:
        yield Trouble(
            "beam.diameter",
            "the size of the beam is told twice" if given else "the beam has no size",
            "either `diameter` (1/e^2) or `fwhm`",
            "remove one" if given else "add one",
        )
    if beam.fwhm is not None and beam.profile != "gaussian":
        yield Trouble("beam.fwhm", "only a Gaussian has its FWHM here", "`diameter`", "give that")
    told = [key for key in (beam.file, beam.file_pixel) if key is not None]
    if len(told) != (2 if beam.profile == "file" else 0):
        yield Trouble(
            "beam.file",
            "a profile from a file needs `file` and `file_pixel`, and no other has them",
            'all three of `profile = "file"`, `file` and `file_pixel`',
            "add what is missing or remove what is too much",
        )
    if beam.emitters is not None and beam.divergence is None:
        yield Trouble(
            "beam.emitters", "emitters fill a `divergence`", "a full angle", "add `divergence`"
        )


def aperture(beam: Beam, element: Element) -> Iterator[Trouble]:
    """A beam that fits through the aperture."""
    sizes = beam.diameter or tuple(size * FWHM_TO_DIAMETER for size in beam.fwhm or ())
    bell = beam.profile in ("gaussian", "super-gaussian")
    if bell and sizes and max(sizes) > element.aperture:
        yield Trouble(
            "beam.diameter" if beam.diameter else "beam.fwhm",
            f"the beam, {units.length(max(sizes))} across at 1/e^2, is larger than the aperture",
            f"up to the aperture, {units.length(element.aperture)}; two thirds of it cut 1 %",
            "use a larger aperture or a smaller beam",
        )


def wavefront(beam: Beam, element: Element) -> Iterator[Trouble]:
    """A tilt and curvature that the pixels can follow: the field is constant on each of them."""
    if element.kind != "single" or element.size is None:
        return
    pitch = max(pitches(element))
    bend = element.aperture / 2 / abs(beam.curvature) if beam.curvature else 0.0
    slope = max(abs(math.sin(angle)) for angle in beam.tilt) + bend
    step = 2 * math.pi * slope * pitch / beam.wavelength
    if step > MOST_STEP:
        yield Trouble(
            "beam.curvature" if bend else "beam.tilt",
            f"the wavefront turns by {step:.2g} rad from pixel to pixel at the aperture's edge",
            f"at most {MOST_STEP:.2g} rad, pixels of {units.length(pitch * MOST_STEP / step)}",
            "use more pixels, or a flatter wavefront",
        )


def cell_beam(beam: Beam, element: Element) -> Iterator[Trouble]:
    """What a unit cell, lit by a plane wave, cannot see."""
    if element.kind == "single":
        return
    for name, plain in (("decentre", (0, 0)), ("tilt", (0, 0)), ("curvature", None)):
        if getattr(beam, name) != plain:
            yield Trouble(
                f"beam.{name}",
                "the orders of a unit cell do not hang on it",
                "a single element",
                "remove it",
            )


def plane(plane: Plane) -> Iterator[Trouble]:
    """The length that each kind of plane needs, and no other."""
    needs = {"lens": "focal_length", "screen": "distance"}
    for kind, key in needs.items():
        is_there = getattr(plane, key) is not None
        if plane.kind == kind and not is_there:
            text = f"a {kind} needs its {key.replace('_', ' ')}"
            yield Trouble(f"plane.{key}", text, "a length", 'add it: "100 mm"')
        if plane.kind != kind and is_there:
            yield Trouble(
                f"plane.{key}",
                f'it contradicts `kind = "{plane.kind}"`',
                f'only with `kind = "{kind}"`',
                f'remove it, or set `kind = "{kind}"`',
            )


def window(plane: Plane, element: Element) -> Iterator[Trouble]:
    """A window for a single element, told as the plane measures."""
    if element.kind == "unit-cell":
        if plane.kind == "screen":
            yield Trouble(
                "plane.kind", "a unit cell is judged by its orders", "angles, lens", "choose one"
            )
        return
    wanted = "window_angle" if plane.kind == "angles" else "window"
    other = "window" if plane.kind == "angles" else "window_angle"
    if getattr(plane, wanted) is None:
        yield Trouble(f"plane.{wanted}", "how much to look at is not told", "a size", "add it")
    if getattr(plane, other) is not None:
        yield Trouble(f"plane.{other}", f"`{wanted}` tells the window here", wanted, "remove it")
    if plane.kind == "angles" and plane.shifts != (0.0,):
        yield Trouble(
            "plane.shifts", "the far field does not shift", "a lens or a screen", "remove it"
        )


def reach(beam: Beam, element: Element, plane: Plane) -> Iterator[Trouble]:
    """A window that the pixels address, and in which waves travel."""
    if element.kind != "single" or element.size is None:
        return
    halves = half_window(plane)
    if halves is None:
        return
    for axis, half, pitch in zip("yx", halves, pitches(element), strict=True):
        limit = sampling.largest_angle(beam.wavelength, pitch)
        if half > math.sin(limit) + 1e-9:
            key = "window_angle" if plane.kind == "angles" else "window"
            yield Trouble(
                f"plane.{key}",
                f"the window reaches {units.angle(math.asin(min(1.0, half)))} along {axis}",
                f"at most {units.angle(limit)}, which pixels of {units.length(pitch)} address",
                "look at a smaller window, or use smaller pixels",
            )
    if math.hypot(*halves) >= 1:
        yield Trouble("plane", "the corners of the window are evanescent", "s < 1", "shrink it")


def pitches(element: Element) -> tuple[float, float]:
    """Pixel pitch (y, x) [m] of a single element."""
    assert element.size is not None
    return element.size[0] / element.pixels[0], element.size[1] / element.pixels[1]


def half_window(plane: Plane) -> tuple[float, float] | None:
    """Direction cosines (y, x) of the window's border in the far field; None where it has none."""
    if plane.kind == "angles" and plane.window_angle is not None:
        return math.sin(plane.window_angle[0] / 2), math.sin(plane.window_angle[1] / 2)
    if plane.kind == "lens" and plane.window is not None and plane.focal_length:
        y, x = (
            sampling.focal_direction(size / 2, plane.focal_length, plane.mapping)
            for size in plane.window
        )
        return y, x
    return None
