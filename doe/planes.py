"""A single element's light on the planes of its config, each by the propagator that serves."""

import math
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import NamedTuple

import jax
import jax.numpy as jnp
import numpy as np
from jaxtyping import Array, Complex, Float
from scipy import ndimage

from doe import machine, sampling, units
from doe.config import derived
from doe.config.schema import Config
from doe.errors import BudgetError, ConfigError, Fault
from doe.optics import choice
from doe.optics.beam import beam_field, blurred
from doe.optics.far_field import (
    addressed_power,
    centres,
    defocus_phase,
    far_field,
    far_field_grid,
)
from doe.optics.phasor import phasor
from doe.optics.propagate import angular_spectrum, fresnel_scaled
from doe.result import PlaneLight

Near = Complex[Array, "y x"]
FLAT = 0.001  # of a resolved angle: a screen this near to straight lines of directions is on them
FINE = 8  # samples of the far field to a resolved angle, from which a screen is interpolated
MOST_DIRECTIONS = 8192  # along an axis of that far field
PAD = 3  # so that rays from one edge of the element to the far edge of the window are kept
FIELDS, FIELD_BYTES = 4, 8  # complex64 fields of the padded size at the peak: 2.4, and margin
ALWAYS = (0.0, float("inf"))


class Lit(NamedTuple):
    """Coherent light of a single element, the power of the whole beam being 1."""

    planes: list[PlaneLight]
    cut: float  # by aperture and element
    addressed: float  # in the field that the pixels address; the rest behind it is in replicas


def light_on_planes(config: Config, phase: Float[np.ndarray, "y x"], folder: Path) -> Lit:
    """Light behind a mask of `phase` [rad] on every plane of the config.

    folder: where the file of a measured beam is looked for. Error: ConfigError where a plane
    cannot be reached without aliasing, BudgetError where it does not fit memory.
    """
    field, cut = beam_field(config, folder)
    near = jnp.asarray(field, jnp.complex64) * phasor(jnp.asarray(phase, jnp.float32))
    kinds = {"angles": in_directions, "lens": behind_lens, "screen": on_screen}
    make = kinds[config.plane.kind]
    planes = [make(config, near, shift) for shift in config.plane.shifts]
    pitch = derived.pixel_pitch(config)[1]
    return Lit(planes, cut, float(addressed_power(far_field_grid(near, pitch), pitch)))


def smeared(plane: PlaneLight, config: Config) -> PlaneLight:
    """The plane with the beam's divergence in it: M^2, residual angle, emitters."""
    scale = config.plane.focal_length or config.plane.distance or 1.0
    steps = float(plane.y[1] - plane.y[0]), float(plane.x[1] - plane.x[0])
    light = blurred(plane.irradiance, config.beam, steps, scale)
    return PlaneLight(**(vars(plane) | {"irradiance": light}))


def points(size: tuple[float, float], samples: tuple[int, int]) -> list[Float[np.ndarray, " p"]]:
    """Sample places (y, x) in the middle of equal parts of a window about the axis."""
    return [((np.arange(n) + 0.5) / n - 0.5) * s for s, n in zip(size, samples, strict=True)]


def density(far: Complex[Array, "y x"], wavelength: float) -> Float[np.ndarray, "y x"]:
    """Power per direction cosine squared, |T|^2 / wavelength^2."""
    light: Float[np.ndarray, "y x"] = np.asarray(far.real**2 + far.imag**2, float)
    return light / wavelength**2


def in_directions(config: Config, near: Near, shift: float) -> PlaneLight:
    """The far field over direction cosines."""
    assert config.plane.window_angle is not None
    pitch, wavelength = derived.pixel_pitch(config)[1], config.beam.wavelength
    size_y, size_x = (2 * np.sin(angle / 2) for angle in config.plane.window_angle)
    y, x = points((size_y, size_x), config.plane.samples)
    light = density(far_field(near, pitch, wavelength, y, x), wavelength)
    why = "a far field has no distance"
    return PlaneLight("angles", shift, y, x, light, "far field", ALWAYS, why)


def behind_lens(config: Config, near: Near, shift: float) -> PlaneLight:
    """The focal plane of a lens with its mapping, or a plane `shift` beyond it."""
    plane, wavelength = config.plane, config.beam.wavelength
    assert plane.window is not None
    assert plane.focal_length is not None
    pitch = derived.pixel_pitch(config)[1]
    rows, columns = config.element.pixels
    if shift:
        place_y, place_x = (jnp.asarray(centres(n, pitch), jnp.float32) for n in (rows, columns))
        near = near * phasor(defocus_phase(place_y, place_x, plane.focal_length, shift, wavelength))
    places = points(plane.window, plane.samples)
    directions = [
        np.array([sampling.focal_direction(p, plane.focal_length, plane.mapping) for p in axis])
        for axis in places
    ]
    slope_y, slope_x = (np.gradient(s, p) for s, p in zip(directions, places, strict=True))
    far = far_field(near, pitch, wavelength, *directions)
    light = density(far, wavelength) * slope_y[:, None] * slope_x[None, :]
    why = f"a lens shows the far field, mapped by {plane.mapping}"
    return PlaneLight("lens", shift, places[0], places[1], light, "far field", ALWAYS, why)


def on_screen(config: Config, near: Near, shift: float) -> PlaneLight:
    """A flat screen, by the propagator that serves at its distance."""
    plane, wavelength = config.plane, config.beam.wavelength
    assert plane.window is not None
    assert plane.distance is not None
    distance = plane.distance + shift
    pitch = derived.pixel_pitch(config)[1]
    chosen = choice.choose(config.element.pixels, pitch, wavelength, distance, plane.window)
    y, x = points(plane.window, plane.samples)
    chosen = or_fresnel(config, chosen, distance)
    if chosen.propagator == "far-field":
        light = far_on_screen(config, near, distance, (y, x))
    elif chosen.propagator == "fresnel":
        field = fresnel_scaled(near, pitch, wavelength, distance, y, x)
        light = np.asarray(field.real**2 + field.imag**2, float)
    else:
        y, x, light = near_screen(config, near, distance, chosen)
    name = chosen.propagator.replace("-", " ")
    reach = (chosen.shortest, chosen.longest)
    return PlaneLight("screen", shift, y, x, light, name, reach, chosen.why)


def near_screen(
    config: Config, near: Near, distance: float, chosen: choice.Choice
) -> tuple[Float[np.ndarray, " p"], Float[np.ndarray, " q"], Float[np.ndarray, "p q"]]:
    """Places (y, x) and irradiance by the angular spectrum, on parts of the element's pixels.

    The pixels are cut into parts so fine that all rays which reach the window from any pixel are
    addressed: close behind the element, light of a pixel's own edges is among them.
    """
    assert config.plane.window is not None
    pitch, wavelength = derived.pixel_pitch(config)[1], config.beam.wavelength
    sides = [
        n * pitch / 2 + w / 2
        for n, w in zip(config.element.pixels, config.plane.window, strict=True)
    ]
    steepest = math.sin(math.atan2(max(sides), distance))
    parts = 1 + math.ceil(2 * pitch * steepest / wavelength)
    chosen = replace(chosen, pad=max(chosen.pad, PAD))
    fit_memory(chosen, parts)
    wide = jnp.repeat(jnp.repeat(padded(near, chosen.grid), parts, axis=0), parts, axis=1)
    fine = pitch / parts
    limit = min(steepest, choice.addressed_direction(fine, wavelength))
    # Compiled, it takes 2.4 padded fields; operation by operation it would take 9.
    hop = partial(
        angular_spectrum,
        pitch=fine,
        wavelength=wavelength,
        distance=distance,
        pad=chosen.pad,
        direction=limit,
    )
    field = jax.jit(hop)(wide)
    return cropped(np.asarray(field.real**2 + field.imag**2, float), fine, config.plane.window)


def or_fresnel(config: Config, chosen: choice.Choice, distance: float) -> choice.Choice:
    """Fresnel in place of the choice where it serves and is the better of the two.

    It is better than the far field where its phase error is the smaller one, and than the angular
    spectrum, which gives the field at the element's own pixels, where finer samples are asked for.
    """
    plane, shape = config.plane, config.element.pixels
    assert plane.window is not None
    pitch, wavelength = derived.pixel_pitch(config)[1], config.beam.wavelength
    step = min(size / n for size, n in zip(plane.window, plane.samples, strict=True))
    far_y, far_x = (n * pitch / 2 + w / 2 for n, w in zip(shape, plane.window, strict=True))
    error = choice.fresnel_error(math.hypot(far_y, far_x), pitch, wavelength, distance)
    if chosen.propagator == "far-field":
        is_better = error < choice.TOLERANCE * chosen.shortest / distance
    else:
        is_better = chosen.propagator == "angular-spectrum" and step < pitch
    if error > choice.TOLERANCE or not is_better:
        return chosen
    shortest, longest = choice.fresnel_range(math.hypot(far_y, far_x), pitch, wavelength, distance)
    why = f"free window and samples, and the paraxial phase error is at most {error:.2g} rad"
    return replace(chosen, propagator="fresnel", shortest=shortest, longest=longest, why=why)


def fit_memory(chosen: choice.Choice, parts: int) -> None:
    """Refuse an angular spectrum whose padded fields need more than the memory budget."""
    rows, columns = chosen.grid
    needed = FIELDS * FIELD_BYTES * rows * columns * (chosen.pad * parts) ** 2
    budget = machine.memory_budget()
    if needed > budget:
        raise BudgetError(
            Fault(
                f"the screen needs {units.gigabytes(needed)}, the budget is "
                f"{units.gigabytes(budget)}",
                "a padded field that fits",
                "look at a smaller window, or use fewer pixels",
                key="plane.window",
            )
        )


def padded(near: Near, grid: tuple[int, int]) -> Near:
    """The near field with as many dark pixels on both sides, at least up to the grid."""
    margins = [-(-(n - size) // 2) for n, size in zip(grid, near.shape, strict=True)]
    return jnp.pad(near, [(margin, margin) for margin in margins])


def cropped(
    light: Float[np.ndarray, "y x"], pitch: float, window: tuple[float, float]
) -> tuple[Float[np.ndarray, " p"], Float[np.ndarray, " q"], Float[np.ndarray, "p q"]]:
    """The part of a field on the element's pixels that lies in the window."""
    places = [centres(n, pitch) for n in light.shape]
    kept = [np.abs(p) <= size / 2 for p, size in zip(places, window, strict=True)]
    return places[0][kept[0]], places[1][kept[1]], light[np.ix_(*kept)]


def far_on_screen(
    config: Config,
    near: Near,
    distance: float,
    places: tuple[Float[np.ndarray, " out_y"], Float[np.ndarray, " out_x"]],
) -> Float[np.ndarray, "out_y out_x"]:
    """Irradiance on a flat screen in the far field: s_z^4 |T|^2 / (wavelength z)^2.

    With s = x / sqrt(x^2 + y^2 + z^2) exactly; interpolated from a fine grid of directions where
    that bends the window's lines. Source: first Rayleigh-Sommerfeld kind far away (design.md's
    conventions; derived).
    """
    y, x = places[0][:, None], places[1][None, :]
    away = np.sqrt(y**2 + x**2 + distance**2)
    s_y, s_x = y / away, x / away
    pitch, wavelength = derived.pixel_pitch(config)[1], config.beam.wavelength
    # The element's own sag towards the screen, so that only k (s.x)^2 / (2 z) is left out.
    rows, columns = (centres(n, pitch) for n in config.element.pixels)
    sag = np.pi / (wavelength * distance) * (rows[:, None] ** 2 + columns[None, :] ** 2)
    near = near * phasor(jnp.asarray(sag, jnp.float32))
    resolved = wavelength / (max(config.element.pixels) * pitch)
    straight = [axis / np.hypot(axis, distance) for axis in places]
    bend = max(np.abs(s_y - straight[0][:, None]).max(), np.abs(s_x - straight[1][None, :]).max())
    if bend <= FLAT * resolved:
        far = far_field(near, pitch, wavelength, *straight)
        straight_on: Float[np.ndarray, "y x"] = density(far, wavelength) * (distance / away) ** 4
        return straight_on / distance**2
    counts = [int(np.ceil(2 * np.abs(s).max() / resolved * FINE)) + 4 for s in (s_y, s_x)]
    if max(counts) > MOST_DIRECTIONS:
        raise ConfigError(
            Fault(
                f"the screen spans {max(counts) // FINE} resolved angles, too many to map exactly",
                f"at most {MOST_DIRECTIONS // FINE}",
                "look at a smaller window, or at angles",
                key="plane.window",
            )
        )
    grids = [(np.arange(n) - (n - 1) / 2) * resolved / FINE for n in counts]
    table = np.asarray(far_field(near, pitch, wavelength, *grids))
    indices = [s * FINE / resolved + (n - 1) / 2 for s, n in zip((s_y, s_x), counts, strict=True)]
    # The amplitude, which varies half as fast as the irradiance, is what is interpolated.
    real, imag = (
        ndimage.map_coordinates(part, indices, order=3, mode="nearest")
        for part in (table.real, table.imag)
    )
    light = (real**2 + imag**2) / wavelength**2
    return np.asarray(light * (distance / away) ** 4 / distance**2)
