"""Scenarios of every kind that the conventions allow, and what somebody may spoil in them, as Hypothesis strategies."""

import io
import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from hypothesis import strategies as st

NAMES = ("b", "c", "d", "e", "TOI-1 b", "x'", "β", "01", "inner_most+")
SAMPLE_ROWS = 8
MASS_UNITS = {"Mearth": 3.0035e-6, "Mjup": 9.5458e-4, "M_sun": 1.0}
LENGTH_UNITS = {"au": 1.0, "km": 6.6846e-9, "Rsun": 4.6505e-3}
GM = 2.9591220828e-4
EPOCH = 2459000.0


@dataclass(frozen=True)
class Written:
    """A scenario as it lies on the disk: the content of its TOML, and its sample file if there is one."""

    content: dict[str, Any]
    sample_name: str = ""
    sample_bytes: bytes = b""


def as_toml(value: Any, top: bool = True) -> str:
    """Write TOML: inline tables below the top level, so that every shape can be written."""
    if isinstance(value, dict):
        pairs = [f"{as_toml(key, False)} = {as_toml(inner, False)}" for key, inner in value.items()]
        return "\n".join(pairs) if top else "{ " + ", ".join(pairs) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(as_toml(inner, False) for inner in value) + "]"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        plain = all(letter.isprintable() and letter not in '"\\' for letter in value)
        return f'"{value}"' if plain else '"' + "".join(f"\\U{ord(letter):08x}" for letter in value) + '"'
    return repr(value)


def digits(value: float) -> str:
    return f"{value:.6g}"


@st.composite
def spread(
    draw: st.DrawFn, value: float, unit: str, share: float = 0.05, positive: bool = True, most: float = math.inf
) -> str:
    """A quantity about a value, in any of the forms, its error counted from the value, but not from above ``most``."""
    error = min(abs(value), most) * share * draw(st.sampled_from([0.01, 0.3, 1.0, 4.0])) or 0.01
    forms = [
        "{v} {u}",
        "{v} {u}",
        "{v} ± {s} {u}",
        "{v} +{s} -{h} {u}",
        "normal({v}, {s}) {u}",
        "uniform({l}, {t}) {u}",
    ]
    forms.append("truncated normal({v}, {s}, {l}, {t}) {u}")
    if positive and value > 0.0:
        forms += ["log-uniform({v}, {w}) {u}", "half-normal({v}) {u}", "< {v} (95 %) {u}"]
    form = draw(st.sampled_from(forms))
    parts = {"v": value, "s": error, "h": error / 2, "l": value - error, "t": value + 2 * error, "w": value * 1.1}
    return form.format(u=unit, **{key: digits(part) for key, part in parts.items()}).strip()


@st.composite
def angle(draw: st.DrawFn, share: float = 0.05) -> str:
    if draw(st.integers(0, 3)) == 0:
        return "uniform(0, 360) deg"
    degrees = draw(st.integers(-90, 400))
    unit, value = draw(st.sampled_from([("deg", float(degrees)), ("rad", math.radians(degrees))]))
    return draw(spread(value, unit, share, positive=False, most=1.0))


@st.composite
def in_units(draw: st.DrawFn, value: float, units: dict[str, float], share: float = 0.1) -> str:
    unit = draw(st.sampled_from(sorted(units)))
    return draw(spread(value / units[unit], unit, share))


@st.composite
def eccentricity(draw: st.DrawFn, tame: bool) -> object:
    if tame:
        return draw(st.sampled_from([0, "0", 0.1, "< 0.2 (95 %)", "0.02 ± 0.03", "0.3 ± 0.1", "0.3 +0.1 -0.05"]))
    kind = draw(st.integers(0, 9))
    if kind < 2:
        return draw(st.sampled_from([0, 0.0, "0", "0.0"]))
    if kind < 4:
        return draw(
            st.sampled_from(["< 0.2 (95 %)", "uniform(0, 0.6)", "half-normal(0.05)", "0.02 ± 0.03", "0.9 ± 0.05"])
        )
    value = draw(st.sampled_from([0.01, 0.05, 0.1, 0.3, 0.6, 0.9, 0.97]))
    return value if kind == 4 else draw(spread(value, "", 0.1))


@st.composite
def orbit(draw: st.DrawFn, period_d: float, star_msun: float, mode: "Mode", companion: bool) -> dict[str, Any]:
    """The table of a planet or companion in the elements' frames."""
    table: dict[str, Any] = {}
    if draw(st.booleans()):
        table["period"] = draw(spread(period_d, "d", 1e-3) | spread(period_d / 365.25, "yr", 1e-3))
    else:
        axis_au = (GM * star_msun * (period_d / math.tau) ** 2) ** (1 / 3)
        table["semi_major_axis"] = draw(in_units(axis_au, LENGTH_UNITS, 1e-2))
    table["eccentricity"] = draw(eccentricity(mode.tame))
    circular = str(table["eccentricity"]) in ("0", "0.0")
    phases = ["mean_longitude_star", "mean_longitude_planet", "time_of_conjunction"]
    if not circular or draw(st.booleans()):
        table[draw(st.sampled_from(["omega_star", "omega_planet"]))] = draw(angle())
        phases += ["mean_anomaly", "time_of_periastron"]
    phase = draw(st.sampled_from(phases))
    if phase.startswith("time"):
        when = EPOCH + draw(st.integers(-900, 900)) + draw(st.floats(0, 1))
        table[phase] = f"{when:.4f} ± {digits(period_d * draw(st.sampled_from([1e-4, 1e-2, 0.5])))} {mode.scale}"
    else:
        table[phase] = draw(angle(1.0))
    table.update(draw(mass(period_d, companion)))
    table.update(draw(tilt(mode, companion)))
    if draw(st.integers(0, 3)) == 0:
        table["radius"] = draw(spread(draw(st.sampled_from([1.0, 4.0, 12.0])), "Rearth", 0.1))
    return table


@st.composite
def mass(draw: st.DrawFn, period_d: float, companion: bool) -> dict[str, Any]:
    if companion:
        return {"mass": draw(in_units(draw(st.sampled_from([0.02, 0.2, 1.1])), {"Msun": 1.0, "Mjup": 9.5458e-4}))}
    key = draw(st.sampled_from(["mass", "mass_sin_i", "semi_amplitude"]))
    value_msun = 10.0 ** draw(st.sampled_from([-8.0, -6.0, -5.0, -4.0, -3.0, -2.0]))
    if key != "semi_amplitude":
        return {key: draw(in_units(value_msun, MASS_UNITS))}
    speed_m_s = 28.4e3 * value_msun / 9.5458e-4 * 1e-3 * (365.25 / period_d) ** (1 / 3)
    return {key: draw(spread(speed_m_s, "m/s", 0.1) | spread(speed_m_s / 1e3, "km/s", 0.1))}


@st.composite
def tilt(draw: st.DrawFn, mode: "Mode", companion: bool) -> dict[str, Any]:
    if "inclination" in mode.plane:
        if companion and draw(st.booleans()):
            return {"inclination": draw(angle_of_tilt()), "node": draw(angle())}
        return {}
    table: dict[str, Any] = {}
    if mode.star_radius and draw(st.booleans()):
        table["impact_parameter"] = draw(spread(draw(st.sampled_from([0.0, 0.2, 0.9, 3.0])), "", 0.2))
    elif mode.plane.get("nodes") == "isotropic" and draw(st.booleans()):
        table["inclination"] = "isotropic independent"
    else:
        table["inclination"] = draw(angle_of_tilt())
    if "nodes" not in mode.plane:
        table["node"] = draw(angle())
    return table


@st.composite
def angle_of_tilt(draw: st.DrawFn) -> str:
    return draw(spread(draw(st.sampled_from([0.5, 30.0, 88.0, 90.0, 91.0, 135.0, 179.0])), "deg", 0.02))


@st.composite
def state(draw: st.DrawFn, period_d: float, star_msun: float, companion: bool) -> dict[str, Any]:
    """The table of a body in Cartesian coordinates, on a bound orbit or not far from one."""
    axis_au = (GM * star_msun * (period_d / math.tau) ** 2) ** (1 / 3)
    where, lift = draw(st.floats(0, math.tau)), draw(st.floats(-0.1, 0.1))
    speed = math.sqrt(GM * star_msun / axis_au) * draw(st.sampled_from([1.0, 1.0, 1.05, 0.8, 1.3]))
    place = (axis_au * math.cos(where), axis_au * math.sin(where), axis_au * lift)
    motion = (-speed * math.sin(where), speed * math.cos(where), 0.0)
    return {
        "mass": draw(mass(period_d, True) if companion else in_units(1e-4, MASS_UNITS).map(lambda m: {"mass": m}))[
            "mass"
        ],
        "position": [draw(spread(x, "au", 1e-3, positive=False)) for x in place],
        "velocity": [draw(spread(v, "au/d", 1e-3, positive=False)) for v in motion],
    }


@dataclass(frozen=True)
class Mode:
    """What the whole scenario has decided when its bodies are made."""

    frame: str
    scale: str
    plane: dict[str, Any]
    star_radius: bool
    tame: bool
    """No large eccentricity: the step of a map is that of the periastron, so a forced map takes millions of them."""


@st.composite
def planes(draw: st.DrawFn) -> dict[str, Any]:
    kind = draw(st.sampled_from(["common", "isotropic", "scattered", "equal", "free", "none"]))
    if kind == "common":
        return {"inclination": draw(angle_of_tilt())}
    if kind in ("isotropic", "scattered"):
        scatter = (
            {"mutual_scatter": draw(st.sampled_from(["1 deg", "0.3 rad", "20 deg"]))} if kind == "scattered" else {}
        )
        return {"inclination": "isotropic", **scatter}
    return {"equal": {"nodes": "equal"}, "free": {"nodes": "isotropic"}, "none": {}}[kind]


@st.composite
def integration(draw: st.DrawFn) -> dict[str, Any]:
    table: dict[str, Any] = {
        "span": draw(
            st.sampled_from(["10 inner orbits", "1e5 inner orbits", "40 outer orbits", "10 secular cycles", "1 Myr"])
        )
    }
    choices = {"method": ["auto", "whfast", "trace", "ias15"], "engine": ["auto", "rebound"]}
    choices |= {"steps_per_periastron": [17, 25.0, 60], "indicator": [True, False]}
    for key, values in choices.items():
        if draw(st.booleans()):
            table[key] = draw(st.sampled_from(values))
    return table


@st.composite
def endings(draw: st.DrawFn) -> dict[str, Any]:
    choices = {"mass_radius": ["chen-kipping-2017"], "ejection_distance": ["300 au", "1e9 km"]}
    choices |= {"stop_approach": ["1e-4 au", "3 Rjup"], "stop_distance": ["100 au"]}
    return {key: draw(st.sampled_from(values)) for key, values in choices.items() if draw(st.integers(0, 2)) == 0}


@st.composite
def valid_looking(draw: st.DrawFn) -> Written:
    frame = draw(st.sampled_from(["jacobi", "jacobi", "astrocentric", "astrocentric", "cartesian"]))
    star_msun = draw(st.sampled_from([0.08, 0.7, 1.0, 2.3]))
    star: dict[str, Any] = {"mass": draw(spread(star_msun, "Msun", 0.05))}
    if draw(st.booleans()):
        star["radius"] = draw(spread(star_msun, "Rsun", 0.05))
    if draw(st.booleans()):
        star["age"] = draw(st.sampled_from(["5 ± 2 Gyr", "100 Myr"]))
    plane = draw(planes()) if frame != "cartesian" else {}
    how = draw(integration())
    tame = how.get("method") in ("whfast", "trace")
    mode = Mode(frame, draw(st.sampled_from(["BJD_TDB", "BJD_UTC", "BJD"])), plane, "radius" in star, tame)
    elements: dict[str, Any] = {"frame": frame, "epoch": f"{EPOCH} {mode.scale}"}
    if frame != "cartesian":
        elements["fit"] = draw(st.sampled_from(["keplerian", "dynamical"]))
        elements["independent_omega_and_periastron_time"] = draw(st.booleans())
        if draw(st.integers(0, 3)) == 0:
            elements["data_span"] = draw(st.sampled_from(["30 d", "1200 d"]))
    elif draw(st.integers(0, 2)) == 0:
        star |= {"position": ["0.01 au", "0 km", "1 Rsun"], "velocity": ["10 m/s", "0 au/d", "-1 km/s"]}
    period_d = 10.0 ** draw(st.sampled_from([-0.3, 0.5, 0.9, 1.5, 2.5]))
    planets: dict[str, Any] = {}
    for name in draw(st.lists(st.sampled_from(NAMES), min_size=1, max_size=4, unique=True)):
        planets[name] = draw(
            state(period_d, star_msun, False) if frame == "cartesian" else orbit(period_d, star_msun, mode, False)
        )
        period_d *= draw(st.sampled_from([1.0, 1.2, 1.5, 2.01, 3.5, 10.0]))
    content: dict[str, Any] = {"title": "any", "star": star, "elements": elements, "planets": planets}
    content |= {"plane": plane} if plane else {}
    if draw(st.integers(0, 3)) == 0:
        period_d *= draw(st.sampled_from([4.0, 50.0]))
        content["companion"] = draw(
            state(period_d, star_msun, True) if frame == "cartesian" else orbit(period_d, star_msun, mode, True)
        )
    content |= {"draws": {"seed": draw(st.integers(0, 2**63 - 1))}, "integration": how}
    content |= {"physics": {"relativity": draw(st.booleans())}, "endings": draw(endings())}
    if draw(st.integers(0, 3)) == 0:
        content["rearranged"] = {"axis_share": draw(st.sampled_from([0.01, 0.3, 0.99]))}
    return draw(with_samples(content)) if draw(st.integers(0, 2)) == 0 else Written(content)


# ---------------------------------------------------------------------------------------------------------------------
# Sample files


@st.composite
def with_samples(draw: st.DrawFn, content: dict[str, Any]) -> Written:
    """Take some plain numbers of the planets from a sample file instead."""
    columns: dict[str, Any] = {}
    rows = draw(st.sampled_from([2, 3, SAMPLE_ROWS, 40]))
    chance = np.random.default_rng(draw(st.integers(0, 999)))
    for name, table in content["planets"].items():
        for key, value in list(table.items()):
            found = _number_and_unit(value)
            if found is None or not draw(st.booleans()):
                continue
            number, unit = found
            column = f"{key}_{name}"
            columns[column] = (
                number * (1.0 + 0.01 * chance.normal(size=rows))
                if unit[:3] != "BJD"
                else (number - 2450000.0 + 0.01 * chance.normal(size=rows))
            )
            table[key] = {"column": column}
            table[key] |= {"unit": unit} if unit else {}
            table[key] |= {"offset": 2450000} if unit[:3] == "BJD" else {}
    if not columns:
        return Written(content)
    ending = draw(st.sampled_from([".csv", ".ecsv", ".npz"]))
    samples: dict[str, Any] = {"file": f"posterior{ending}"}
    weight = draw(st.sampled_from(["", "", "weight", "log_weight"]))
    if weight:
        samples[weight] = "w"
        columns["w"] = chance.exponential(size=rows) if weight == "weight" else chance.normal(size=rows) * 3.0
    if draw(st.booleans()):
        samples["log_probability"], columns["lnp"] = "lnp", chance.normal(size=rows)
    if draw(st.booleans()):
        samples["chain"], columns["chain"] = "chain", np.arange(rows) % 2
    return Written({**content, "samples": samples}, samples["file"], _sample_file(columns, ending))


def _number_and_unit(value: object) -> tuple[float, str] | None:
    if isinstance(value, float):
        return value, ""
    parts = value.split() if isinstance(value, str) else []
    try:
        number = float(parts[0]) if parts else None
    except ValueError:
        return None
    if number is None:
        return None
    unit = parts[-1] if parts[-1][:1].isalpha() else ""
    return number, unit


def _sample_file(columns: dict[str, Any], ending: str) -> bytes:
    if ending == ".npz":
        target = io.BytesIO()
        np.savez(target, **columns)
        return target.getvalue()
    rows = zip(*columns.values(), strict=True)
    quoted = [f'"{name}"' for name in columns]
    lines = [",".join(quoted), *(",".join(repr(float(cell)) for cell in row) for row in rows)]
    if ending == ".ecsv":
        kinds = [f"# - {{name: {name}, datatype: float64}}" for name in quoted]
        lines = ["# %ECSV 1.0", "# ---", "# delimiter: ','", "# datatype:", *kinds, "# schema: astropy-2.0", *lines]
    return "\n".join([*lines, ""]).encode()


# ---------------------------------------------------------------------------------------------------------------------
# Spoilt ones

ODD = (
    True,
    0,
    -1,
    1e300,
    -1e-300,
    float("nan"),
    [],
    {},
    {"column": "x"},
    "",
    "0 d",
    "1e-9 d",
    "1e12 d",
    "1e-12 au",
    "1e9 au",
    "1e-12 Mearth",
    "30 Msun",
    "1e6 m/s",
    "0.9999",
    "0.5 ± 3",
    "uniform(0, 0.99)",
    "< 1e-300 (95 %)",
    "isotropic",
    "isotropic independent",
    "0 deg",
    "180 deg",
    "1e20 deg",
    "2400000.5 BJD",
    "2459000 ± 1e5 BJD_TDB",
    "1e5 inner orbits",
    "1e-9 yr",
    "log-uniform(1e-149, 1e149) d",
    "normal(1, 1e140) Msun",
    "whfast",
    "\x00",
    "日本",
)


def places_of(table: dict[str, Any], above: tuple[str, ...] = ()) -> list[tuple[str, ...]]:
    found = []
    for key, value in table.items():
        found.append((*above, key))
        if isinstance(value, dict):
            found += places_of(value, (*above, key))
    return found


@st.composite
def spoilt(draw: st.DrawFn) -> Written:
    written = draw(valid_looking())
    content = written.content
    for _ in range(draw(st.integers(1, 2))):
        places = places_of(content)
        *above, key = draw(st.sampled_from(places))
        table = content
        for step in above:
            table = table[step]
        deed = draw(st.sampled_from(["delete", "rename", "change", "change", "change", "exchange", "copy"]))
        if deed == "delete":
            del table[key]
        elif deed == "rename":
            table[draw(st.sampled_from([key[:-1], key.upper(), "mass", "period", "node", "x"]))] = table.pop(key)
        elif deed == "change":
            table[key] = draw(st.sampled_from(ODD))
        elif deed == "exchange":
            table[key] = table[draw(st.sampled_from(sorted(table)))]
        else:
            *_, other = draw(st.sampled_from(places))
            table[other] = table[key]
        if not isinstance(content, dict) or not content:
            break
    sample_bytes = written.sample_bytes
    if sample_bytes and draw(st.integers(0, 3)) == 0:
        at = draw(st.integers(0, len(sample_bytes) - 1))
        sample_bytes = draw(
            st.sampled_from([sample_bytes[:at], sample_bytes[:at] + b"\xff" + sample_bytes[at + 1 :], sample_bytes * 2])
        )
    return Written(content, written.sample_name, sample_bytes)


ANY = st.one_of(valid_looking(), valid_looking(), spoilt())
