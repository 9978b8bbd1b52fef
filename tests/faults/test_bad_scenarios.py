"""Bad scenarios: each is refused in words that say what, where and what to do, and nothing else ever comes out."""

import re
from pathlib import Path

import pytest
from good_scenario import CARTESIAN, GOOD, spoilt

from stabcheck.errors import ScenarioError, StabcheckError
from stabcheck.scenario import Scenario

PLANE = 'nodes = "equal"'
C_TILT = 'impact_parameter = "0.4 ± 0.1"\n'
B_TILT = 'inclination = "88.2 ± 0.3 deg"\n'
B_ECC = 'eccentricity = "0.03 +0.02 -0.01"'
B_OMEGA = 'omega_star = "120 ± 15 deg"\n'
B_PHASE = 'time_of_periastron = "2459001.10 ± 0.02 BJD_TDB"'
B_PERIOD = 'period = "4.31 ± 0.0005 d"'
B_MASS = 'mass_sin_i = "5.2 ± 0.6 Mearth"'
STAR_RADIUS = 'radius = "0.76 ± 0.02 Rsun"\n'


def table(name: str) -> str:
    """A table of the good scenario with its keys."""
    found = re.search(rf"^\[{re.escape(name)}\]\n(?:[^\[\n].*\n)*", GOOD, re.MULTILINE)
    assert found
    return found[0]


# (what is spoilt, the text, words of the first problem's what, where, why or do)
FAULTS: list[tuple[str, str, str, tuple[str, ...]]] = [
    # -- tables and keys
    ("empty file", "", "[star] is missing", ("add [star]", "also", "[integration]")),
    ("no star", spoilt(table("star"), ""), "[star] is missing", ("mass",)),
    ("no elements", spoilt(table("elements"), ""), "[elements] is missing", ("frame",)),
    ("no planets", spoilt(table("planets.b") + "\n" + table("planets.c"), ""), "[planets.b] is missing", ("NAME",)),
    ("no draws", spoilt(table("draws"), ""), "[draws] is missing", ("seed",)),
    ("no integration", spoilt(table("integration"), ""), "[integration] is missing", ("span",)),
    ("planets without one", spoilt(table("planets.b") + "\n" + table("planets.c"), "[planets]\n"), "no planet", ()),
    (
        "star is a number",
        spoilt(table("star"), "").replace("title", "star = 3\ntitle"),
        "star is not a table",
        ("[star]",),
    ),
    (
        "planet is a text",
        spoilt(table("planets.c"), '[planets]\nc = "x"\n'),
        "planets.c is not a table",
        ("[planets.b]",),
    ),
    ("array of planets", GOOD.replace("[planets.b]", "[[planets]]").replace(table("planets.c"), ""), "not a table", ()),
    ("unknown table", GOOD + "\n[endigns]\n", "unknown key 'endigns'", ("write endings",)),
    ("unknown key", spoilt('fit = "k', 'fitt = "k'), "unknown key 'fitt'", ("[elements] fitt", "write fit")),
    ("unknown far key", spoilt("seed =", "zzz = 3\nseed ="), "unknown key 'zzz'", ("the keys here are seed",)),
    (
        "key in the wrong table",
        spoilt("seed =", "span = 3\nseed ="),
        "unknown key 'span'",
        ("belongs in [integration]",),
    ),
    ("key above all tables", "seed = 3\n" + GOOD, "unknown key 'seed'", ("belongs in [draws]",)),
    (
        "bare omega",
        spoilt('omega_star = "120', 'omega = "120'),
        "unknown key 'omega'",
        ("omega_star or omega_planet", "180°"),
    ),
    (
        "bare longitude",
        spoilt(B_PHASE, 'mean_longitude = "3 deg"'),
        "'mean_longitude'",
        ("mean_longitude_star or mean_longitude_planet",),
    ),
    ("K", spoilt("semi_amplitude", "K"), "unknown key 'K'", ("write semi_amplitude",)),
    ("a planet called star", spoilt("[planets.c]", "[planets.star]"), "called 'star'", ("another name",)),
    ("a planet with a dot", spoilt("[planets.c]", '[planets."c.1"]'), "not a name", ("letters, digits",)),
    ("text not a text", spoilt('title = "Two planets"', "title = 3"), "3 is not a text", ("quotes",)),
    # -- what must be said
    (
        "no frame",
        spoilt('frame = "jacobi"\n', ""),
        "frame is missing",
        ("jacobi", "astrocentric", "cartesian", "0.8 %"),
    ),
    ("no fit", spoilt('fit = "keplerian"\n', ""), "fit is missing", ("keplerian", "dynamical")),
    ("no epoch", spoilt('epoch = "2459000.0 BJD_TDB"\n', ""), "epoch is missing", ("BJD_TDB",)),
    ("no star mass", spoilt('mass = "0.81 ± 0.03 Msun"\n', ""), "mass is missing", ("[star]",)),
    ("no size", spoilt(B_PERIOD + "\n", ""), "size of the orbit is missing", ("period or semi_major_axis",)),
    (
        "no phase",
        spoilt(B_PHASE + "\n", ""),
        "the phase is missing",
        ("mean_anomaly, mean_longitude_star", "no default"),
    ),
    ("no mass", spoilt(B_MASS + "\n", ""), "the mass is missing", ("mass, mass_sin_i or semi_amplitude",)),
    ("no inclination", spoilt(B_TILT, ""), "the inclination is missing", ("impact_parameter", "[plane]", "isotropic")),
    ("no eccentricity", spoilt(B_ECC + "\n", ""), "eccentricity is missing", ("circular",)),
    ("no omega", spoilt(B_OMEGA, ""), "ω is missing", ("omega_star or omega_planet", "180°")),
    ("no node", spoilt(table("plane"), ""), "node is missing", ("undetermined", 'nodes = "equal"')),
    ("no seed", spoilt("seed = 20260101\n", ""), "seed is missing", ("[draws]",)),
    ("no span", spoilt('span = "1e5 inner orbits"\n', ""), "span is missing", ("[integration]",)),
    (
        "periastron of a circle",
        spoilt(B_ECC, "eccentricity = 0").replace(B_OMEGA, ""),
        "circular orbit without ω",
        ("time_of_conjunction",),
    ),
    # -- contradictions
    (
        "two sizes",
        spoilt(B_PERIOD, B_PERIOD + '\nsemi_major_axis = "0.05 au"'),
        "given twice",
        ("period and semi_major",),
    ),
    ("two phases", spoilt(B_PHASE, B_PHASE + '\nmean_anomaly = "3 deg"'), "the phase is given twice", ("keep one",)),
    ("two masses", spoilt(B_MASS, B_MASS + '\nmass = "5 Mearth"'), "the mass is given twice", ("mass and mass_sin_i",)),
    ("two omegas", spoilt(B_OMEGA, B_OMEGA + 'omega_planet = "300 deg"\n'), "ω is given twice", ("180°",)),
    (
        "two inclinations",
        spoilt(C_TILT, C_TILT + 'inclination = "89 deg"\n'),
        "inclination is given twice",
        ("keep one",),
    ),
    ("plane and own", spoilt(PLANE, 'inclination = "isotropic"'), "inclination does not belong here", ("[plane]",)),
    ("node twice", spoilt(B_TILT, B_TILT + 'node = "3 deg"\n'), "node is given here and for all", ("keep one",)),
    (
        "scatter without plane",
        spoilt(PLANE, 'mutual_scatter = "2 deg"\nnodes = "equal"'),
        "without inclination",
        ("plane",),
    ),
    ("empty plane", spoilt(PLANE, ""), "empty", ("leave the table out",)),
    ("impact without radius", spoilt(STAR_RADIUS, ""), "impact_parameter without a radius", ("add radius to [star]",)),
    (
        "scale differs",
        spoilt("2459001.10 ± 0.02 BJD_TDB", "2459001.10 ± 0.02 BJD_UTC"),
        "in BJD_UTC, the epoch in BJD_TDB",
        ("convert",),
    ),
    (
        "wide omega",
        spoilt("120 ± 15 deg", "120 ± 40 deg"),
        "ω is known to ±40 deg only",
        ("independent_omega_and_periastron_time = true", "time_of_conjunction"),
    ),
    (
        "companion m sin i",
        spoilt('mass = "0.2 ± 0.02 Msun"', 'mass_sin_i = "0.2 Msun"'),
        "mass_sin_i does not belong",
        ("true mass",),
    ),
    (
        "companion K",
        spoilt('mass = "0.2 ± 0.02 Msun"', 'semi_amplitude = "2 km/s"'),
        "semi_amplitude does not belong",
        ("true mass",),
    ),
    ("companion inside", spoilt("40 ± 3 au", "0.06 ± 0.01 au"), "companion is not outside", ("[planets.c]",)),
    ("rules cross", spoilt('stop_distance = "100 au"', 'stop_distance = "100 km"'), "not below stop_distance", ()),
    (
        "weights twice",
        GOOD + '[samples]\nfile = "x.csv"\nweight = "w"\nlog_weight = "l"\n',
        "weights are given twice",
        (),
    ),
    (
        "column without samples",
        spoilt('"4.31 ± 0.0005 d"', '{ column = "P", unit = "d" }'),
        "there is no sample file",
        ("[samples]",),
    ),
    ("samples without column", GOOD + '[samples]\nfile = "here.csv"\n', "no quantity is taken", ("column",)),
    (
        "samples not there",
        GOOD + '[samples]\nfile = "gone.csv"\n',
        "no quantity is taken",
        ("no sample file 'gone.csv'",),
    ),
    (
        "samples of a long name",
        GOOD + f'[samples]\nfile = "{"x" * 5000}.csv"\n',
        "no quantity is taken",
        ("no sample file",),
    ),
    ("samples of another kind", GOOD + '[samples]\nfile = "x.pkl"\n', "no quantity is taken", (".npz",)),
    ("face-on m sin i", spoilt("88.2 ± 0.3 deg", "0 deg"), "inclination of 0", ("true mass",)),
    (
        "state in elements",
        spoilt(B_MASS, B_MASS + '\nposition = ["1 au", "0 au", "0 au"]'),
        "position does not belong",
        ('frame = "cartesian"',),
    ),
    (
        "elements in Cartesian",
        spoilt('mass = "1 Mjup"', 'mass = "1 Mjup"\nperiod = "3 d"', CARTESIAN),
        "period does not belong",
        ("position and velocity say all",),
    ),
    ("Cartesian without velocity", spoilt("velocity", "velocty", CARTESIAN), "unknown key 'velocty'", ("velocity",)),
    ("Cartesian Keplerian", spoilt('"cartesian"', '"cartesian"\nfit = "keplerian"', CARTESIAN), "fit is keplerian", ()),
    (
        "Cartesian m sin i",
        spoilt('mass = "1 Mjup"', 'mass_sin_i = "1 Mjup"', CARTESIAN),
        "mass_sin_i does not belong",
        (),
    ),
    ("two components", spoilt('["5.2 au", "0 au", "0 au"]', '["5.2 au", "0 au"]', CARTESIAN), "three components", ()),
    (
        "star at half a state",
        spoilt('mass = "1 Msun"', 'mass = "1 Msun"\nposition = ["0 au", "0 au", "0 au"]', CARTESIAN),
        "only one of position and velocity",
        (),
    ),
    (
        "isotropic planet",
        spoilt("88.2 ± 0.3 deg", "isotropic"),
        "'isotropic' does not fit",
        ("retrograde", "isotropic independent"),
    ),
    (
        "independent planet, equal nodes",
        spoilt("88.2 ± 0.3 deg", "isotropic independent"),
        "without isotropic node",
        ('nodes = "isotropic"',),
    ),
    (
        "independent plane",
        spoilt(PLANE, 'inclination = "isotropic independent"')
        .replace(B_TILT, "")
        .replace(C_TILT, "")
        .replace('inclination = "80 deg"', 'inclination = "80 deg"\nnode = "0 deg"'),
        "does not fit",
        ('write "isotropic"',),
    ),
    # -- values
    (
        "two signs",
        spoilt("+0.02 -0.01", "+0.02 --0.01"),
        "cannot be read",
        ("two signs", "one minus", "[planets.b] eccentricity"),
    ),
    ("blank error", spoilt("± 0.0005 d", "± d"), "cannot be read", ("blank error",)),
    ("zero error", spoilt("± 0.0005 d", "± 0 d"), "cannot be read", ("error of 0",)),
    ("negative error", spoilt("± 0.0005 d", "± -0.0005 d"), "cannot be read", ("error is negative",)),
    ("error in brackets", spoilt("4.31 ± 0.0005 d", "4.31(5) d"), "cannot be read", ("write it out",)),
    ("decimal comma", spoilt("4.31 ± 0.0005 d", "4,31 d"), "cannot be read", ("decimal point",)),
    ("limit without confidence", spoilt("< 0.1 (95 %)", "< 0.1"), "cannot be read", ("confidence", "half-normal")),
    ("limit with a share", spoilt("(95 %)", "(0.95)"), "cannot be read", ("percent",)),
    ("lower limit", spoilt("< 0.1 (95 %)", "> 0.1 (95 %)"), "cannot be read", ("lower limit",)),
    ("number without unit", spoilt('"4.31 ± 0.0005 d"', "4.31"), "cannot be read", ("without a unit", "d, h, min")),
    ("text without unit", spoilt("0.0005 d", "0.0005"), "cannot be read", ("a time needs one", "d, h, min")),
    ("unit of another thing", spoilt("0.0005 d", "0.0005 deg"), "cannot be read", ("deg' is a unit of angle",)),
    ("megajoule", spoilt("5.2 ± 0.6 Mearth", "5.2 ± 0.6 MJ"), "cannot be read", ("not a known unit", "Mjup")),
    ("unit for a number", spoilt("0.03 +0.02 -0.01", "0.03 deg"), "cannot be read", ("write the number alone",)),
    (
        "misspelt distribution",
        spoilt('uniform(0, 360) deg"\ntime', 'unifrom(0, 360) deg"\ntime'),
        "cannot be read",
        ("write uniform",),
    ),
    (
        "unit inside brackets",
        spoilt('uniform(0, 360) deg"\ntime', 'uniform(0 deg, 360 deg)"\ntime'),
        "cannot be read",
        ("after",),
    ),
    (
        "limits exchanged",
        spoilt('uniform(0, 360) deg"\ntime', 'uniform(360, 0) deg"\ntime'),
        "cannot be read",
        ("lower limit",),
    ),
    (
        "more than a turn",
        spoilt('uniform(0, 360) deg"\ntime', 'uniform(0, 720) deg"\ntime'),
        "cannot be read",
        ("full turn",),
    ),
    (
        "nothing left of a normal",
        spoilt('"0.03 +0.02 -0.01"', '"truncated normal(0, 0.01, 0.5, 1)"'),
        "cannot be read",
        ("limits",),
    ),
    ("text nan", spoilt("0.03 +0.02 -0.01", "nan"), "cannot be read", ("nan is not a value",)),
    ("nan", spoilt('"0.03 +0.02 -0.01"', "nan"), "eccentricity is nan", ("finite",)),
    ("inf in the title's place", spoilt('"Two planets"', "[1.0, inf]"), "title is inf", ("finite",)),
    ("beyond double", spoilt("4.31 ± 0.0005 d", "1e999 d"), "cannot be read", ("too large",)),
    ("tiny beyond use", spoilt("4.31 ± 0.0005 d", "1e-300 d"), "cannot be read", ("beyond what can be computed",)),
    ("unbound", spoilt('"0.03 +0.02 -0.01"', '"1.2 ± 0.1"'), "does not fit", ("not a bound orbit",)),
    ("negative e", spoilt('"0.03 +0.02 -0.01"', "-0.1"), "does not fit", ("0 <= e < 1",)),
    ("mass of nothing", spoilt("0.81 ± 0.03 Msun", "0 Msun"), "does not fit", ("not above 0", "[star] mass")),
    ("negative period", spoilt("4.31 ± 0.0005 d", "-4.31 ± 0.0005 d"), "does not fit", ("not above 0",)),
    ("negative inclination", spoilt("88.2 ± 0.3 deg", "-3 deg"), "does not fit", ("0 and 180", "node")),
    ("reduced epoch", spoilt("2459000.0 BJD_TDB", "59000.5 BJD_TDB"), "does not fit", ("reduced date", "2 400 000.5")),
    ("reduced phase", spoilt("2459001.10 ±", "9001.10 ±"), "does not fit", ("2 450 000",)),
    ("other clock", spoilt("2459000.0 BJD_TDB", "2459000.0 HJD"), "cannot be read", ("8 minutes", "BJD_TDB")),
    ("epoch with error", spoilt("2459000.0 BJD_TDB", "2459000.0 ± 1 BJD_TDB"), "does not fit", ("without an error",)),
    ("epoch a number", spoilt('"2459000.0 BJD_TDB"', "2459000.0"), "cannot be read", ("BJD_TDB, BJD_UTC or BJD",)),
    ("epoch a calendar date", spoilt('"2459000.0 BJD_TDB"', "2020-05-31"), "cannot be read", ("calendar date",)),
    (
        "unknown frame",
        spoilt('"jacobi"', '"barycentric"'),
        "'barycentric' is not known",
        ("jacobi", "astrocentric", "cartesian"),
    ),
    ("misspelt fit", spoilt('"keplerian"', '"Keplerian"'), "'Keplerian' is not known", ('write "keplerian"',)),
    ("unknown method", spoilt('"trace"', '"leapfrog"'), "'leapfrog' is not known", ("whfast",)),
    ("negative seed", spoilt("20260101", "-1"), "-1 is not a seed", ("2^63",)),
    ("seed a text", spoilt("20260101", '"x"'), "'x' is not a seed", ("whole number",)),
    ("seed true", spoilt("20260101", "true"), "True is not a seed", ()),
    ("yes in quotes", spoilt("relativity = true", 'relativity = "yes"'), "neither yes nor no", ("without quotes",)),
    ("span without what", spoilt("1e5 inner orbits", "1e5"), "not a length of time", ("inner orbits",)),
    ("span of nothing", spoilt("1e5 inner orbits", "0 yr"), "cannot be followed", ()),
    ("span a number", spoilt('"1e5 inner orbits"', "1e5"), "not a length of time", ()),
    ("coarse step", spoilt('method = "trace"', "steps_per_periastron = 10"), "10 does not fit", ("outgrown",)),
    ("share above one", GOOD + "[rearranged]\naxis_share = 2\n", "2 does not fit", ("share",)),
    (
        "unknown radius rule",
        spoilt("chen-kipping-2017", "chen-kipping"),
        "is not known",
        ('write "chen-kipping-2017"',),
    ),
    ("drawn distance rule", spoilt('"0.001 au"', '"0.001 ± 0.0001 au"'), "does not fit", ("same in every draw",)),
    ("column without unit", spoilt('"4.31 ± 0.0005 d"', '{ column = "P" }'), "cannot be read", ("a time needs one",)),
    (
        "column with another key",
        spoilt('"4.31 ± 0.0005 d"', '{ column = "P", units = "d" }'),
        "cannot be read",
        ("'units'",),
    ),
    ("column without a name", spoilt('"4.31 ± 0.0005 d"', '{ unit = "d" }'), "cannot be read", ("name of the column",)),
    (
        "offset of a period",
        spoilt('"4.31 ± 0.0005 d"', '{ column = "P", unit = "d", offset = 1 }'),
        "cannot be read",
        ("reduced dates",),
    ),
    # -- not TOML
    ("key twice", spoilt(B_PERIOD, B_PERIOD + "\n" + B_PERIOD), "not valid TOML", ("a key once", "line")),
    ("table twice", GOOD + "[star]\n", "not valid TOML", ("a table once",)),
    ("no quotes", spoilt('"jacobi"', "jacobi"), "not valid TOML", ("quotes",)),
    ("whole number of 100 digits", spoilt("20260101", "9" * 100), "too large a whole number", ("64 bits",)),
    ("whole number of 5000 digits", spoilt("20260101", "9" * 5000), "not", ("do",)),
    ("thousands of brackets", "x = " + "[" * 20_000, "not", ("do",)),
]


def refusal(text: str, folder: Path) -> ScenarioError:
    with pytest.raises(StabcheckError) as caught:
        Scenario.from_text(text, "bad.toml", folder)
    assert isinstance(caught.value, ScenarioError)
    return caught.value


@pytest.mark.parametrize(("text", "what", "words"), [row[1:] for row in FAULTS], ids=[row[0] for row in FAULTS])
def test_a_spoilt_scenario_is_refused_in_words(text: str, what: str, words: tuple[str, ...], tmp_path: Path) -> None:
    (tmp_path / "here.csv").write_text("P_b\n4.31\n")
    error = refusal(text, tmp_path)
    assert what in error.what
    assert error.where.startswith("bad.toml") and error.do
    for word in words:
        assert word in str(error)


def test_the_catalogue_has_at_least_sixty_different_faults() -> None:
    assert len({text for _, text, _, _ in FAULTS}) == len(FAULTS) >= 60


def test_control_the_unspoilt_scenarios_are_read(tmp_path: Path) -> None:
    for text in (GOOD, CARTESIAN):
        Scenario.from_text(text, "good.toml", tmp_path)


def test_all_problems_are_listed_at_once(tmp_path: Path) -> None:
    text = spoilt(B_PHASE + "\n", "").replace("0.81 ± 0.03 Msun", "0.81 ± 0.03 d").replace("seed", "sed")
    shown = str(refusal(text, tmp_path))
    assert "3 problems" in shown
    for words in ("the phase is missing", "unknown key 'sed'", "'0.81 ± 0.03 d' cannot be read"):
        assert shown.count(words) == 1


def test_very_many_problems_are_counted_and_the_message_stays_short(tmp_path: Path) -> None:
    shown = str(refusal(GOOD + "\n".join(f"zz{k} = 1" for k in range(500)), tmp_path))
    assert "500 problems" in shown and "and 488 more" in shown
    assert len(shown.splitlines()) < 20


def test_a_misspelt_key_is_not_reported_as_missing_too(tmp_path: Path) -> None:
    for old, new in (('frame = "j', 'fram = "j'), ('omega_star = "120', 'omega = "120'), ("seed", "sed")):
        assert "missing" not in str(refusal(spoilt(old, new), tmp_path))


@pytest.mark.parametrize("content", [b"\xff\xfe\x00", b"title = '\xe9'", b"\x00" * 30, b"x" * 2_000_000])
def test_a_file_that_is_no_scenario_is_refused_by_name(content: bytes, tmp_path: Path) -> None:
    path = tmp_path / "odd.toml"
    path.write_bytes(content)
    with pytest.raises(ScenarioError, match=re.escape("odd.toml")):
        Scenario.read(path)


def test_a_file_that_is_not_there_is_refused_by_name(tmp_path: Path) -> None:
    for path in (tmp_path / "gone.toml", tmp_path, tmp_path / ("x" * 5000), tmp_path / "a\0b"):
        with pytest.raises(ScenarioError) as caught:
            Scenario.read(path)
        assert caught.value.where and caught.value.do


def test_an_error_survives_the_way_between_processes(tmp_path: Path) -> None:
    import pickle

    error = refusal(spoilt('frame = "jacobi"\n', ""), tmp_path)
    again = pickle.loads(pickle.dumps(error))
    assert type(again) is ScenarioError and str(again) == str(error)
