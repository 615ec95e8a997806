"""Quantities that follow from a resolved config, each stated once (SI)."""

from doe import sampling
from doe.config.schema import Config
from doe.config.target import Grid

Pair = tuple[float, float]


def period(config: Config) -> Pair:
    """Period (y, x) [m] of a unit cell; the size of a single element."""
    found = config.element.period or config.element.size
    assert found is not None  # filled in by config.load.resolve
    return found


def beam_diameter(config: Config) -> float:
    """Smaller 1/e^2 diameter [m] of the beam."""
    assert config.beam.diameter is not None  # filled in by config.load.resolve
    return min(config.beam.diameter)


def index(config: Config) -> float:
    """Refractive index of the element at the design wavelength."""
    assert config.material.index is not None  # filled in by config.load.resolve
    return config.material.index


def pixel_pitch(config: Config) -> Pair:
    """Pixel pitch (y, x) [m]."""
    (period_y, period_x), (rows, columns) = period(config), config.element.pixels
    return period_y / rows, period_x / columns


def order_steps(config: Config) -> Pair:
    """Direction cosine of order 1 along (y, x): wavelength / period. Source: grating equation."""
    period_y, period_x = period(config)
    return config.beam.wavelength / period_y, config.beam.wavelength / period_x


def spot_spacing(config: Config) -> float | None:
    """Direction cosine between the nearest spots of a grid; None for other targets and one spot."""
    if not isinstance(config.target, Grid):
        return None
    axes = zip(order_steps(config), config.target.nearest_steps(), strict=True)
    return min((step * orders for step, orders in axes if orders), default=None)


def aperture_loss(config: Config) -> float | None:
    """Share of a Gaussian beam that the aperture cuts; None for other profiles."""
    if config.beam.profile != "gaussian":
        return None
    return sampling.aperture_loss(beam_diameter(config), config.element.aperture)


def mask_count(config: Config) -> int:
    """Binary masks M of a relief of 2^M levels; 0 for a continuous profile."""
    return max(0, config.element.levels.bit_length() - 1)


def layer_depths(config: Config) -> list[float]:
    """Depth [m] of each etch, the pi etch first."""
    masks = range(1, mask_count(config) + 1)
    return [sampling.etch_depth(config.beam.wavelength, index(config), etch) for etch in masks]


def phase_height(config: Config) -> float:
    """Height [m] of one radian of phase in air: wavelength / (2 pi (n - 1))."""
    return 2 * sampling.etch_depth(config.beam.wavelength, index(config), 1) / sampling.TURN


def rule_pixels(config: Config) -> tuple[tuple[int, int], tuple[int, int]]:
    """Minimum feature and minimum gap in pixels, each (y, x); 1 on an axis that does not vary."""
    pitch, pixels = pixel_pitch(config), config.element.pixels
    feature, gap = (
        [
            sampling.pixels_for(rule, size) if rule and count > 1 else 1
            for size, count in zip(pitch, pixels, strict=True)
        ]
        for rule in (config.process.min_feature, config.process.min_gap)
    )
    return (feature[0], feature[1]), (gap[0], gap[1])
