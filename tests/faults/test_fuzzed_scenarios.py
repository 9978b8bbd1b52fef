"""Whatever is done to a valid scenario: it is read, or refused in words. Never anything else."""

import tomllib
from collections import Counter
from pathlib import Path
from typing import Any

import numpy as np
from any_scenario import as_toml
from good_scenario import CARTESIAN, GOOD
from hypothesis import given, settings
from hypothesis import strategies as st

from stabcheck.errors import ScenarioError, StabcheckError
from stabcheck.scenario import Scenario

ENDS = np.array([2.0**-54, 0.5, 1.0 - 2.0**-53])
"""The uniform numbers at which a distribution could fail."""

VALUES = st.one_of(
    st.sampled_from(
        [
            True,
            0,
            -1,
            10**25,
            1e308,
            -1e308,
            float("nan"),
            float("inf"),
            5e-324,
            [],
            [1],
            {},
            {"column": "x"},
            "",
            "nan d",
            "-1e-320 d",
            "1e308 Gyr",
            "1 ± 1e308 d",
            "< 1e-300 (95 %) Mjup",
            "log-uniform(1e-320, 1e-310) d",
            "isotropic",
            "isotropic independent",
            "uniform(0, 1e-200) au",
            "truncated normal(1, 1e-9, 0, 0.5)",
            "π d",
            "1e5 inner orbits",
            "9" * 400 + " d",
            "truncated normal(0, 1e140, -1e149, 1e149)",
            "(" * 150,
            "± ± ±",
            "\x00",
            "log-uniform(1e-149, 1e149) d",
            "normal(0, 0)",
            "< 1 (99.9999999999999999 %)",
            "< 1 (50.00000001 %)",
        ]
    ),
    st.text(max_size=12),
    st.floats(),
    st.integers(),
    st.dictionaries(st.sampled_from(["column", "unit", "offset", "x"]), st.one_of(st.text(max_size=3), st.floats())),
    st.builds(
        "{} {}".format, st.floats(), st.sampled_from(["d", "Mjup", "deg", "au", "BJD_TDB", "m/s", "Msun", "", "yr"])
    ),
)
PLACES = (
    [
        (*at, key)
        for at, content in [((), tomllib.loads(GOOD))]
        for name, inner in content.items()
        for at, key in (
            [((name, deep), low) for deep, below in inner.items() for low in below]
            if name == "planets"
            else [((name,), low) for low in inner]
            if isinstance(inner, dict)
            else [((), name)]
        )
    ]
    + [(name,) for name in tomllib.loads(GOOD)]
    + [("planets", "b"), ("planets", "c")]
)


@st.composite
def mutated(draw: st.DrawFn) -> dict[str, Any]:
    content = tomllib.loads(draw(st.sampled_from([GOOD, GOOD, CARTESIAN])))
    for _ in range(draw(st.integers(1, 3))):
        *above, key = draw(st.sampled_from(PLACES))
        table: Any = content
        for step in above:
            table = table.get(step) if isinstance(table, dict) else None
        if not isinstance(table, dict):
            continue
        deed = draw(st.sampled_from(["delete", "rename", "add", "change", "change", "change", "exchange"]))
        if deed == "delete":
            table.pop(key, None)
        elif deed == "rename" and key in table:
            table[draw(st.text(max_size=8))] = table.pop(key)
        elif deed == "add":
            table[draw(st.one_of(st.text(max_size=8), st.sampled_from([place[-1] for place in PLACES])))] = draw(VALUES)
        elif deed == "change":
            table[key] = draw(VALUES)
        elif deed == "exchange" and table:
            other = draw(st.sampled_from(sorted(table)))
            table[key] = table[other]
    return content


def outcome(text: str) -> str:
    """Say what comes out; anything but a scenario or a refusal in words ends the test."""
    try:
        scenario = Scenario.from_text(text, "fuzzed.toml", Path("nowhere"))
    except StabcheckError as error:
        assert isinstance(error, ScenarioError)
        assert "where  fuzzed.toml" in str(error) and "\n  do     " in str(error)
        return "refused"
    assert scenario.canonical() and scenario.body_names
    for quantity in scenario.quantities().values():
        assert quantity.column or np.isfinite(quantity.at(ENDS)).all()
    return "read"


def test_whatever_is_done_to_a_scenario_it_is_read_or_refused_in_words() -> None:
    seen: Counter[str] = Counter()

    @settings(max_examples=200, derandomize=True, deadline=None, database=None)
    @given(content=mutated(), doubled=st.integers(0, 40))
    def try_one(content: dict[str, Any], doubled: int) -> None:
        text = as_toml(content)
        lines = text.splitlines()
        seen[outcome(text)] += 1
        seen[outcome("\n".join([*lines, *lines[doubled : doubled + 1]]))] += 1

    try_one()
    assert seen.total() >= 400  # two texts an example
    assert min(seen["read"], seen["refused"]) > 20  # neither is the only thing that ever happens


def test_control_the_writer_of_the_fuzz_writes_what_was_read() -> None:
    assert tomllib.loads(as_toml(tomllib.loads(GOOD))) == tomllib.loads(GOOD)
