"""Warnings a sound config still deserves: what to mind, why, and what to do."""

import math
from collections.abc import Iterator

from doe import sampling, units
from doe.config import derived
from doe.config.schema import Config
from doe.config.target import NoTarget

THIN_FEATURE = 10  # wavelengths; below it thin-element figures are off. Common practice, no source
THIN_ANGLE = 15 * units.DEGREE  # common practice, no source
FEW_PERIODS = 3  # in the beam; common practice, no source
CLOSE_SPOTS = 2.0  # spacing over spot diameter; common practice, no source


def warnings(config: Config) -> list[str]:
    """All warnings of a job, in the order of the config's tables."""
    return [
        *beam_warnings(config),
        *pixel_warnings(config),
        *process_warnings(config),
        *target_warnings(config),
    ]


def beam_warnings(config: Config) -> Iterator[str]:
    """A converted size, periods in the beam, and light lost at the aperture."""
    if config.beam.fwhm is not None:
        sizes = " x ".join(units.length(size) for size in config.beam.diameter or ())
        yield f"the FWHM is taken as 1/e^2 diameters of {sizes} (y, x): a factor of 1.699"
    diameter, aperture = derived.beam_diameter(config), config.element.aperture
    lost = derived.aperture_loss(config)
    if lost is not None and lost > 0.01:
        yield (
            f"the aperture of {units.length(aperture)} cuts {units.percent(lost)} off a beam of "
            f"{units.length(diameter)}: use an aperture of at least 1.5 beam diameters"
        )
    longest = max(derived.period(config))
    if config.element.kind == "unit-cell" and diameter < FEW_PERIODS * longest:
        yield (
            f"only {diameter / longest:.1f} periods lie in the beam: the uniformity will "
            f"depend on where the element sits; use a period of at most "
            f"{units.length(diameter / FEW_PERIODS)}"
        )


def pixel_warnings(config: Config) -> Iterator[str]:
    """Where the scalar thin-element model is weak, and slow transforms."""
    wavelength = config.beam.wavelength
    pitch = min(
        p for p, n in zip(derived.pixel_pitch(config), config.element.pixels, strict=True) if n > 1
    )
    if pitch < THIN_FEATURE * wavelength:
        how = "is not valid" if pitch < wavelength / 2 else "is uncertain"
        yield (
            f"pixels of {units.length(pitch)} are {pitch / wavelength:.1f} wavelengths: the scalar "
            f"thin-element model {how} for features below {THIN_FEATURE} wavelengths"
        )
    for count in config.element.pixels:
        if largest_prime(count) > 13:
            yield f"{count} pixels make a slow transform; {next_good(count)} would be faster"


def process_warnings(config: Config) -> Iterator[str]:
    """A mask rule that has no effect, or that is rounded up to whole pixels."""
    pitch = derived.pixel_pitch(config)
    for name in ("min_feature", "min_gap"):
        rule = getattr(config.process, name)
        if rule is None or (name == "min_gap" and rule == config.process.min_feature):
            continue
        used = max(
            sampling.pixels_for(rule, p) * p
            for p, n in zip(pitch, config.element.pixels, strict=True)
            if n > 1
        )
        if rule < min(pitch):
            yield (
                f"{name} of {units.length(rule)} has no effect: "
                f"a pixel is {units.length(min(pitch))}"
            )
        elif used > rule * 1.001:
            yield f"{name} of {units.length(rule)} is rounded up to {units.length(used)}"


def target_warnings(config: Config) -> Iterator[str]:
    """Twin images, wide angles and spots that merge."""
    if isinstance(config.target, NoTarget):
        return
    steps = derived.order_steps(config)
    spots = config.target.spots(steps)
    places = {(round(s.m_y), round(s.m_x)): s.weight for s in spots}
    twins = all(places.get((-m_y, -m_x)) == weight for (m_y, m_x), weight in places.items())
    if config.element.levels == 2 and not twins:
        yield (
            "two levels give every spot a twin of equal power at the opposite side, and this "
            "target is not point-symmetric: use 4 levels or more"
        )
    widest = max(math.hypot(m_y * steps[0], m_x * steps[1]) for m_y, m_x in places)
    if widest > math.sin(THIN_ANGLE):
        yield (
            f"the outermost spot lies at {units.angle(math.asin(widest))}: thin-element figures "
            f"are uncertain beyond {units.angle(THIN_ANGLE)}"
        )
    yield from crowding(config)


def crowding(config: Config) -> Iterator[str]:
    """Spots of a grid closer to one another than the beam resolves."""
    beam, spacing = config.beam, derived.spot_spacing(config)
    spread = sampling.divergence(beam.wavelength, derived.beam_diameter(config), beam.m2)
    if spacing is not None and spacing < CLOSE_SPOTS * spread:
        yield (
            f"the spots lie {spacing / spread:.1f} spot diameters apart, so that they overlap and "
            f"interfere: use a wider beam or a shorter period"
        )


def largest_prime(number: int) -> int:
    """Largest prime factor."""
    factor, rest = 2, number
    while factor * factor <= rest:
        if rest % factor:
            factor += 1
        else:
            rest //= factor
    return rest


def next_good(number: int) -> int:
    """The next number whose prime factors are at most 5."""
    while largest_prime(number) > 5:
        number += 1
    return number
