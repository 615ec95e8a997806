"""The tables of a config as frozen, validated models in SI units."""

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field

from doe.config.quantity import (
    Angle,
    Distance,
    Duration,
    Length,
    Limit,
    Offset,
    Ratio,
    Section,
    Share,
    Shift,
    Spread,
    Wavelength,
    as_pair,
    as_tuple,
    wrong,
)
from doe.config.solver import Solver
from doe.config.target import Target

Whole = Annotated[int, Field(ge=1)]


def check_levels(given: Any) -> Any:
    """Levels of a relief: 0 for a continuous profile, otherwise at least two."""
    if isinstance(given, int) and not isinstance(given, bool) and given != 0:
        if not 2 <= given <= 256:
            raise wrong(
                "a relief has at least two depths, and a level fits in one byte",
                "0 for a continuous profile, or a whole number from 2 to 256",
                "set levels to 2, 4, 8 or 16 for 1, 2, 3 or 4 etch steps",
            )
    elif given != 0 or isinstance(given, bool):
        raise wrong(
            "the number of levels is a whole number",
            "0 for a continuous profile, or a whole number from 2 to 256",
            "set levels to 2, 4, 8 or 16 for 1, 2, 3 or 4 etch steps",
        )
    return given


def plain_text(given: Any) -> Any:
    """Text without control or direction characters, short enough for a drawing."""
    if isinstance(given, str) and not (given.isprintable() and 0 < len(given) <= 120):
        raise wrong(
            "the title has characters that cannot be printed, or no text, or too much",
            "1 to 120 printable characters",
            "use letters, digits and common signs",
        )
    return given


Levels = Annotated[int, BeforeValidator(check_levels)]
Title = Annotated[str, BeforeValidator(plain_text)]


Pair = Annotated[tuple[Length, Length], BeforeValidator(as_pair)]
Shifts = Annotated[tuple[Distance, Distance], BeforeValidator(as_pair)]
Tilts = Annotated[tuple[Angle, Angle], BeforeValidator(as_pair)]
Wholes = Annotated[tuple[Whole, Whole], BeforeValidator(as_pair)]


class Beam(Section):
    """The laser beam at the element; pairs are (y, x)."""

    wavelength: Wavelength
    profile: Literal["gaussian", "super-gaussian", "plane", "file"] = "gaussian"
    diameter: Pair | None = None  # 1/e^2 of the irradiance
    fwhm: Pair | None = None  # in its place, of a Gaussian
    order: Annotated[float, Field(ge=2, le=200)] = 10.0  # m of exp(-2 (2 r / D)^m)
    file: str | None = None  # irradiance, row 0 of a picture at the largest y
    file_pixel: Length | None = None
    m2: Annotated[float, Field(ge=1, le=1000)] = 1.0
    divergence: Angle | None = None  # residual, full 1/e^2 angle; of all emitters where there are
    emitters: Wholes | None = None  # of an incoherent array that fills `divergence`
    decentre: Shifts = (0.0, 0.0)
    tilt: Tilts = (0.0, 0.0)
    curvature: Distance | None = None  # radius of the wavefront at the element, + = diverging
    pulse_duration: Duration | None = None
    bandwidth: Length | None = None


class Element(Section):
    """The element: its cell or size, pixels, levels and clear aperture; pairs are (y, x)."""

    kind: Literal["unit-cell", "single"]
    period: Pair | None = None  # of a unit cell
    size: Pair | None = None  # of a single element
    pixels: Wholes
    levels: Levels
    aperture: Length


class MaterialTable(Section):
    """What the relief is made of: a name with a published index, or an index."""

    name: str | None = None
    index: float | None = None


class Process(Section):
    """The lithography and etch process; spreads are 3 sigma."""

    kind: Literal["masks"] = "masks"
    file: str | None = None
    min_feature: Length | None = None
    min_gap: Length | None = None
    overlay: Shift | None = None
    cd_bias: Shift | None = None
    etch_error: Spread | None = None
    corner_contacts: Literal["allow", "forbid"] = "allow"
    drawn: Literal["standing", "etched"] = "standing"


class Plane(Section):
    """Where the pattern is judged; window and samples are for single elements, (y, x)."""

    kind: Literal["angles", "lens", "screen"]
    focal_length: Length | None = None
    mapping: Literal["f-sin", "f-tan", "f-theta"] = "f-sin"
    distance: Length | None = None  # of a screen
    window: Pair | None = None  # behind a lens or on a screen
    window_angle: Tilts | None = None  # with angles
    samples: Wholes = (256, 256)
    shifts: Annotated[tuple[Distance, ...], BeforeValidator(as_tuple), Field(min_length=1)] = (0.0,)


class Scored(Section):
    """Limits on scores; the names are those of the record's scores."""

    efficiency: Share | None = None
    efficiency_with_surfaces: Share | None = None
    uniformity_error: Share | None = None
    rms_error: Share | None = None
    zero_order: Share | None = None
    zero_order_to_mean: Ratio | None = None
    worst_stray_to_mean: Ratio | None = None
    stray: Share | None = None
    hottest_to_mean: Ratio | None = None
    position_error: Offset | None = None

    def items(self) -> list[tuple[str, Limit]]:
        """Every single comparison with the name of its score."""
        names = Scored.model_fields
        return [(name, one) for name in names for one in getattr(self, name) or ()]


class Made(Scored):
    """Limits the made parts must keep, judged by the forecast."""

    share_of_parts: Spread = Field(default=0.95, alias="yield")


class Limits(Scored):
    """Limits on the drawn mask, and in `made` on the made parts."""

    made: Made | None = None


class Run(Section):
    """The seed of everything random."""

    seed: Annotated[int, Field(ge=0, le=2**32 - 1)] = 1


class Config(Section):
    """A whole job, in SI units."""

    title: Title
    beam: Beam
    element: Element
    material: MaterialTable
    process: Process = Process()
    plane: Plane
    target: Target
    limits: Limits = Limits()
    solver: Solver
    run: Run = Run()
