"""What a preview says, as values: one frozen class a section."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanetFacts:
    """One body at the central values; angles in degrees, NaN where there is nothing to say."""

    name: str
    period_d: float
    semi_major_axis_au: float
    eccentricity: float
    omega_planet_deg: float
    omega_star_deg: float
    mean_anomaly_deg: float
    inclination_deg: float
    node_deg: float
    mass_msun: float
    semi_amplitude_m_s: float
    radius_au: float
    """0 for a point."""
    conjunction: float
    """Next inferior conjunction (the transit side) at or after the epoch: BJD, or days after an epoch without date."""
    periastron: float


@dataclass(frozen=True, slots=True, kw_only=True)
class PairFacts:
    """Two neighbouring orbits at the central values."""

    inner: str
    outer: str
    period_ratio: float
    resonance: tuple[int, int] | None
    """Nearest p:q of low order, None if all are far."""
    offset: float
    """Period ratio over p/q, less 1."""
    separation_hill: float
    mutual_inclination_deg: float


@dataclass(frozen=True, slots=True, kw_only=True)
class RateFacts:
    """What turns the periastron of one orbit, in degrees a Julian century, and what rounds the orbit."""

    name: str
    relativity_deg_century: float
    tide_deg_century: float
    """NaN where the radius is not known."""
    circularisation_yr: float
    love_number: float
    """Assumed."""
    quality_factor: float
    """Assumed."""


@dataclass(frozen=True, slots=True, kw_only=True)
class FrameFacts:
    """What one orbit would be if the same numbers were meant in the other frame."""

    name: str
    period_shift: float
    """Period of the other reading, expressed in the stated frame, over the stated one, less 1."""
    eccentricity_shift: float


@dataclass(frozen=True, slots=True, kw_only=True)
class SpanFacts:
    """The length of a run in four units, at the central values."""

    years: float
    inner_orbits: float
    outer_orbits: float
    secular_cycles: float
    """Of the slowest apsidal mode (Laplace-Lagrange); 0 if there is none."""
    star_ages: float
    """NaN where the age is not given."""


@dataclass(frozen=True, slots=True, kw_only=True)
class CostFacts:
    """What a run takes on this machine if every draw is followed to its span; an estimate."""

    method: str
    why: str
    step_d: float
    """NaN for a method that chooses its own steps."""
    steps_per_draw: float
    seconds_per_draw: float
    """On one core."""
    cores: int
    draws: int
    seconds: float
    """For all draws on all cores."""
    bytes_per_draw: float
    half_width: float
    """Half of the 95 % interval of a fraction near one half from that many draws."""
