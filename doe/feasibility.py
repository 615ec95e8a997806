"""Whether a job is well posed and what is reachable, without any design and without JAX."""

import math
from collections.abc import Iterator
from dataclasses import dataclass

from doe import machine, sampling, units
from doe.bound import bound
from doe.config import derived
from doe.config.advice import warnings
from doe.config.schema import Config
from doe.result import Bound, LimitVerdict
from doe.targets import build
from doe.targets.spots import SpotTarget

STEP_SECONDS = 1.1e-8  # a pixel, start and step of a descent on two cores; measured
FIRST_SECONDS = 6.0  # start of JAX and compilation; measured
SEARCH_SECONDS = 20.0  # of the exact search, 5 to 35 s with the usual work; measured


@dataclass(frozen=True)
class Fact:
    """One quantity that follows from the config: SI value and readable text."""

    name: str
    label: str
    value: float
    text: str


@dataclass(frozen=True)
class Feasibility:
    """All that `doe check` tells."""

    facts: tuple[Fact, ...]
    bound: Bound | None  # None where nothing is wanted
    limits: tuple[LimitVerdict, ...]
    verdicts: tuple[str, ...]
    warnings: tuple[str, ...]

    @property
    def feasible(self) -> bool:
        """False where a limit lies beyond a proved bound."""
        return all(limit.met is not False for limit in self.limits)


def assess(config: Config) -> Feasibility:
    """What a job means and what can be had of it."""
    if config.target.kind == "none":
        facts = (*beam_facts(config), *mask_facts(config))
        return Feasibility(facts, None, (), (), tuple(warnings(config)))
    target = build(config)
    pixels, levels = config.element.pixels, config.element.levels
    reachable = bound(target.m_y, target.m_x, target.share, pixels, levels)
    limits = tuple(verdicts(config, reachable))
    told, cautions = wording(limits, reachable, levels)
    return Feasibility(
        facts=(
            *order_facts(config, target),
            *beam_facts(config),
            *spot_facts(config, target),
            *mask_facts(config),
            *cost_facts(config),
        ),
        bound=reachable,
        limits=limits,
        verdicts=tuple(told),
        warnings=(*cautions, *warnings(config)),
    )


def order_facts(config: Config, target: SpotTarget) -> Iterator[Fact]:
    """Period, order spacing and angles."""
    for axis, period, step in zip(
        "yx", derived.period(config), derived.order_steps(config), strict=True
    ):
        if axis == "x" or config.element.pixels[0] > 1:
            yield Fact(f"period_{axis}_m", f"period along {axis}", period, units.length(period, 7))
            spacing = math.asin(min(1.0, step))
            yield Fact(
                f"order_spacing_{axis}_rad",
                f"order spacing along {axis}",
                spacing,
                f"{units.angle(spacing)}",
            )
    steps = derived.order_steps(config)
    sine = max(
        math.hypot(m_y * steps[0], m_x * steps[1])
        for m_y, m_x in zip(target.m_y, target.m_x, strict=True)
    )
    limit = sampling.largest_angle(config.beam.wavelength, derived.pixel_pitch(config)[1])
    text = f"{units.angle(math.asin(sine))} of {units.angle(limit)} that the pixels address"
    yield Fact("largest_angle_rad", "outermost spot", math.asin(sine), text)


def beam_facts(config: Config) -> Iterator[Fact]:
    """Spot size, light lost at the aperture, and how far the pixels reach."""
    beam, diameter = config.beam, derived.beam_diameter(config)
    if config.plane.focal_length:
        spot = sampling.spot_diameter(beam.wavelength, config.plane.focal_length, diameter, beam.m2)
        yield Fact("spot_diameter_m", "spot diameter (1/e^2)", spot, units.length(spot))
    else:
        angle = sampling.divergence(beam.wavelength, diameter, beam.m2)
        yield Fact("spot_angle_rad", "spot width (1/e^2)", angle, units.angle(angle))
    lost = derived.aperture_loss(config)
    if lost is not None:
        yield Fact("aperture_loss", "beam cut by the aperture", lost, units.percent(lost, 3))


def spot_facts(config: Config, target: SpotTarget) -> Iterator[Fact]:
    """Spacing over spot size, periods in the beam, smear."""
    beam, diameter = config.beam, derived.beam_diameter(config)
    spacing = derived.spot_spacing(config)
    if spacing is not None:
        ratio = spacing / sampling.divergence(beam.wavelength, diameter, beam.m2)
        yield Fact("pitch_to_spot", "spot pitch over spot diameter", ratio, f"{ratio:.2f}")
    periods = diameter / max(derived.period(config))
    yield Fact("periods_in_beam", "periods in the beam", periods, f"{periods:.2f}")
    yield from smear(config, target)


def smear(config: Config, target: SpotTarget) -> Iterator[Fact]:
    """Length by which the bandwidth draws out the outermost spot: offset times dL / L."""
    beam = config.beam
    band = beam.bandwidth
    if band is None and beam.pulse_duration is not None:
        band = sampling.transform_limit(beam.wavelength, beam.pulse_duration)
    if band is None:
        return
    yield Fact("bandwidth_m", "bandwidth (FWHM)", band, units.length(band))
    if config.plane.focal_length is None:
        return
    steps, focal_length = derived.order_steps(config), config.plane.focal_length
    offset = max(
        math.hypot(m_y * steps[0], m_x * steps[1]) * focal_length
        for m_y, m_x in zip(target.m_y, target.m_x, strict=True)
    )
    drawn = offset * band / beam.wavelength
    text = f"{units.length(drawn)} at {units.length(offset)} off the axis"
    yield Fact("smear_m", "smear of the outermost spot", drawn, text)


def mask_facts(config: Config) -> Iterator[Fact]:
    """Index, pixel, etch depths and the mask rule in pixels."""
    index = derived.index(config)
    yield Fact("index", "refractive index", index, f"{index:.6f}")
    pitch_y, pitch_x = derived.pixel_pitch(config)
    text = f"{units.length(pitch_y, 6)} x {units.length(pitch_x, 6)} (y, x)"
    yield Fact("pixel_pitch_x_m", "pixel", pitch_x, text)
    for etch, depth in enumerate(derived.layer_depths(config), start=1):
        text = f"{depth / units.NANO:.1f} nm"
        yield Fact(f"etch_depth_{etch}_m", f"depth of etch {etch}", depth, text)
    feature, _ = derived.rule_pixels(config)
    yield Fact("feature_px", "minimum feature", feature[1], f"{list(feature)} pixels (y, x)")


def cost_facts(config: Config) -> Iterator[Fact]:
    """Memory and time of a run."""
    rows, columns = config.element.pixels
    memory = machine.memory_needed(rows * columns)
    yield Fact("memory_bytes", "memory of a run", memory, units.gigabytes(memory))
    work = rows * columns * config.solver.starts * config.solver.steps
    is_searched = config.solver.refine and config.element.levels > 0
    seconds = FIRST_SECONDS + work * STEP_SECONDS + SEARCH_SECONDS * is_searched
    yield Fact("time_s", "time of a run, roughly", seconds, f"{seconds:.0f} s")


def verdicts(config: Config, reachable: Bound) -> Iterator[LimitVerdict]:
    """Each limit against the bound: False only where a proved bound forbids it."""
    for name, one in config.limits.items():
        met = None
        if name == "efficiency" and one.sense == ">=" and reachable.kind == "proved":
            met = one.value <= reachable.efficiency
        value = reachable.efficiency if name == "efficiency" else None
        yield LimitVerdict(name, str(one), value, met)


def wording(
    limits: tuple[LimitVerdict, ...], reachable: Bound, levels: int
) -> tuple[list[str], list[str]]:
    """What is reachable, a word on each limit, and cautions about limits near or beyond it."""
    usual = reachable.efficiency * reachable.levels_factor
    kind = {"proved": "at most", "best known": "at best known", "estimate": "an estimated"}
    told = [
        f"efficiency: {kind[reachable.kind]} {units.percent(reachable.efficiency)} with a "
        f"continuous phase; {levels or 'continuous'} levels usually leave {units.percent(usual)}"
    ]
    cautions = []
    for limit in limits:
        sense, number = limit.limit.split()
        if limit.name != "efficiency" or sense != ">=":
            asked = number if limit.name.endswith("_to_mean") else units.percent(float(number))
            told.append(f"{limit.name} {sense} {asked}: no bound is known, the design decides")
            continue
        wanted = units.percent(float(number))
        if limit.met is False:
            told.append(f"efficiency >= {wanted}: out of reach, proved")
        elif float(number) <= usual:
            told.append(f"efficiency >= {wanted}: within what these levels usually leave")
        else:
            told.append(f"efficiency >= {wanted}: above what these levels usually leave")
            cautions.append(advice(float(number), reachable, levels))
    return told, cautions


def advice(wanted: float, reachable: Bound, levels: int) -> str:
    """What to do about an efficiency that these levels usually do not leave."""
    finer = next((n for n in (4, 8, 16) if n > levels > 0 and helps(n, wanted, reachable)), 0)
    way = f"{finer} levels would leave room" if finer else "lower the limit"
    asked = units.percent(wanted)
    return f"an efficiency of {asked} is above what {levels} levels usually leave: {way}"


def helps(levels: int, wanted: float, reachable: Bound) -> bool:
    """Whether this many levels usually leave the wanted efficiency."""
    return wanted <= reachable.efficiency * sampling.blaze_efficiency(levels)
