"""A finished design in NumPy: the hatch between the rooms that load JAX and those that do not."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from jaxtyping import Bool, Float, Int, UInt8

from doe.config.quantity import Limit
from doe.config.schema import Config, Limits

Status = Literal["met", "missed", "not judged"]


@dataclass(frozen=True)
class Mask:
    """The drawn relief; `levels` and `layers` are None for a continuous profile."""

    phase: Float[np.ndarray, "y x"]  # rad, before levels
    height: Float[np.ndarray, "y x"]  # m, above the deepest place
    levels: UInt8[np.ndarray, "y x"] | None
    layers: Bool[np.ndarray, "mask y x"] | None  # True = glass left standing, pi etch first


@dataclass(frozen=True)
class FeatureReport:
    """What was measured on one binary layer, in pixels (y, x)."""

    rule: tuple[int, int]
    gap_rule: tuple[int, int]
    breaches: int  # pixels that opening or closing would change
    corner_contacts: int
    edge_length: int  # pixel sides between glass and gap in one cell

    def keeps_rule(self, *, contacts_forbidden: bool) -> bool:
        """Whether the layer can be made under the rule."""
        return self.breaches == 0 and not (contacts_forbidden and self.corner_contacts)


@dataclass(frozen=True)
class OrderTable:
    """Power of every addressed order; the zero order at [ny // 2, nx // 2]."""

    m_y: Int[np.ndarray, " y"]
    m_x: Int[np.ndarray, " x"]
    power: Float[np.ndarray, "y x"]
    target: Float[np.ndarray, "y x"]  # wanted share of the power, 0 = not wanted


@dataclass(frozen=True)
class Trace:
    """Course of the start that won, one row a look at the drawn design."""

    step: Int[np.ndarray, " row"]
    loss: Float[np.ndarray, " row"]
    efficiency: Float[np.ndarray, " row"]
    uniformity_error: Float[np.ndarray, " row"]


@dataclass(frozen=True)
class Bound:
    """What a perfect continuous phase could reach, and what the levels leave of it."""

    efficiency: float
    levels_factor: float  # sinc^2(1/N): an estimate, no ceiling
    kind: Literal["proved", "best known", "estimate"]


@dataclass(frozen=True)
class LimitVerdict:
    """One stated limit and how it came out; `met` is None where it was not judged."""

    name: str
    limit: str
    value: float | None
    met: bool | None


@dataclass(frozen=True)
class PlaneLight:
    """Light of a single element in one plane; the power of the whole beam before it is 1.

    y, x are metres from the axis, or direction cosines for the plane kind "angles"; irradiance is
    per their square. Widths are four times the standard deviation within the window (ISO 11146).
    """

    kind: str
    shift: float  # m beyond the plane of the config
    y: Float[np.ndarray, " y"]
    x: Float[np.ndarray, " x"]
    irradiance: Float[np.ndarray, "y x"]
    method: str
    range: tuple[float, float]  # m, distances at which the method serves
    why: str

    @property
    def power(self) -> float:
        """Share of the beam's power in the window."""
        return float(self.irradiance.sum() * np.gradient(self.y)[0] * np.gradient(self.x)[0])

    @property
    def centroid(self) -> tuple[float, float]:
        """First moments (y, x). Source: ISO 11146-1 (from memory)."""
        total = self.irradiance.sum()
        y = float((self.irradiance.sum(axis=1) * self.y).sum() / total)
        return y, float((self.irradiance.sum(axis=0) * self.x).sum() / total)

    @property
    def width(self) -> tuple[float, float]:
        """Second-moment diameters (y, x). Source: ISO 11146-1 (from memory)."""
        (y, x), total = self.centroid, self.irradiance.sum()
        spread_y = (self.irradiance.sum(axis=1) * (self.y - y) ** 2).sum() / total
        spread_x = (self.irradiance.sum(axis=0) * (self.x - x) ** 2).sum() / total
        return 4 * float(np.sqrt(spread_y)), 4 * float(np.sqrt(spread_x))


@dataclass(frozen=True)
class Result:
    """Everything a record holds."""

    config: Config
    config_text: str
    method: str
    mask: Mask
    features: tuple[FeatureReport, ...]
    orders: OrderTable
    scores: dict[str, float | None]
    bound: Bound
    limits: tuple[LimitVerdict, ...]
    trace: Trace
    warnings: tuple[str, ...]
    seconds: float
    steps: int
    made_by: dict[str, str]

    @property
    def status(self) -> Status:
        """Whether the drawn mask keeps every stated limit, and its layers the mask rule."""
        contacts = self.config.process.corner_contacts == "forbid"
        kept = all(found.keeps_rule(contacts_forbidden=contacts) for found in self.features)
        return status_of(self.limits) if kept else "missed"


def status_of(limits: tuple[LimitVerdict, ...]) -> Status:
    """`met` when every judged limit is met, `not judged` when there is none."""
    judged = [limit.met for limit in limits if limit.met is not None]
    if not judged:
        return "not judged"
    return "met" if all(judged) else "missed"


SOMETIMES = {"position_error"}  # scores that not every target has


def verdict(name: str, limit: Limit, score: float | None) -> bool | None:
    """Whether a score keeps a limit; one that wants light and got none does not."""
    if score is None:
        return None if name in SOMETIMES else False
    return limit.met_by(score)


def judge_limits(limits: Limits, scores: dict[str, float | None]) -> tuple[LimitVerdict, ...]:
    """Each stated limit against the scores; limits on made parts wait for the forecast."""
    drawn = [
        LimitVerdict(name, str(one), scores.get(name), verdict(name, one, scores.get(name)))
        for name, one in limits.items()
    ]
    made = limits.made.items() if limits.made else []
    waiting = [LimitVerdict(f"made.{name}", str(one), None, None) for name, one in made]
    return (*drawn, *waiting)
