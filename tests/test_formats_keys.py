"""The table of keys: complete against the schema and the examples, and narrow enough for a terminal."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any, get_args

import pytest

from reach.cell import LawName
from reach.formats import keys_text
from reach.formats.commands_csv import COLUMNS
from reach.formats.keys import WIDTH
from reach.formats.kinds import ByName, ListOf, Table
from reach.formats.presets import BALLS, REBOUND
from reach.formats.schema import CELL, LIMIT_KEYS
from reach.formats.strikes_csv import COLUMNS as STRIKES

EXAMPLES = sorted((Path(__file__).parents[1] / "examples").glob("*/*.toml"))


def first_words() -> list[str]:
    return [line.split()[0] for line in keys_text().splitlines() if line.startswith("  ") and line[2] != " "]


def schema_keys(table: Table, where: str = "") -> Iterator[str]:
    for name, key in table.keys.items():
        inside = key.kind.item if isinstance(key.kind, ListOf) else key.kind
        dotted = f"{where}.{name}" if where else name
        yield dotted
        if isinstance(inside, Table):
            yield from schema_keys(inside, dotted)


def written_keys(table: dict[str, Any], known: Table, where: str) -> Iterator[str]:
    for name, value in table.items():
        kind = known.keys[name].kind
        inside = kind.item if isinstance(kind, ListOf) else kind
        yield f"{where}.{name}"
        assert not isinstance(value, dict) or isinstance(inside, (Table, ByName))
        if isinstance(inside, Table):
            for item in value if isinstance(value, list) else [value]:
                yield from written_keys(item, inside, f"{where}.{name}")


def test_every_key_stands_once() -> None:
    words = first_words()
    wanted = [key for key in schema_keys(CELL) if "." in key]
    assert len(wanted) > 90
    for key in [*wanted, *(key for keys in LIMIT_KEYS.values() for key in keys[:2]), "source", "override"]:
        assert words.count(key) == 1, key
    for section in CELL.keys:
        assert keys_text().count(f"\n[{section}]  ") == 1


def test_every_column_stands_in_it() -> None:
    log, _, strikes = keys_text().partition("COMMAND LOG")[2].partition("FILE OF STRIKES")
    assert set(COLUMNS.known) <= set(log.replace(",", " ").split())
    assert set(STRIKES.known) <= set(strikes.replace(",", " ").split())


def test_width() -> None:
    lines = keys_text().splitlines()
    assert max(map(len, lines)) <= WIDTH == 100
    assert all(line == line.rstrip() for line in lines)


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.parent.name + "/" + path.name)
def test_keys_of_examples_stand_in_it(path: Path) -> None:
    document = tomllib.loads(path.read_text(encoding="utf-8"))
    words = first_words()
    keys = [
        key for name, table in document.items() for key in written_keys(table, CELL.keys[name].kind, name)
    ]
    assert keys and all(key in words for key in keys)


def test_examples_are_found() -> None:
    assert EXAMPLES


@pytest.mark.parametrize(
    ("key", "words"),
    [
        ("control.period_s", "number in s at least 1e-05 and at most 0.1; default 0.001"),
        ("paddle.shape", 'one of "disc", "plate", "given"; default "disc"'),
        ("arm.urdf", "must be given"),
        ("survey.exact", "true or false; default false"),
        ("survey.max_points", "whole number of at least 1 and at most 10000000; default 2000000"),
        ("follow.point", 'one of "strike", "tip"; or list of 3 numbers'),
        ("accept.require", 'default ["position", "velocity", "torque", "torque rate"]'),
        ("paddle.part", "tables [[paddle.part]], at most 1000"),
        ("contact.arm_gives", "true or false; default false"),
        ("rally.bearings_deg", "each number in degrees; default [0, 90, 180, 270]"),
        ("rally.velocity_spread_m_s", "number in m/s at least 0 and at most 10; default 0"),
        ("trial.sensor.rate_hz", "number in Hz at least 0 and at most 1e+06; default 0"),
        ("trial.gains", "table by name, each number"),
    ],
)
def test_what_a_key_takes(key: str, words: str) -> None:
    text = " ".join(keys_text().split())
    start = text.index(f" {key} ")
    assert words in text[start : start + 300]


def section(name: str) -> str:
    """What is said of a table before its keys."""
    text = " ".join(keys_text().split())
    start = text.index(f"[{name}] may be left out")
    kind = CELL.keys[name].kind
    assert isinstance(kind, Table)
    return text[start : text.index(f" {name}.{next(iter(kind.keys))} ", start)]


def test_every_section_says_what_it_is_for() -> None:
    assert "used by no command" not in keys_text()
    assert "for the command rally" in section("rally") and "counter-clockwise" in section("rally")
    trial = section("trial")
    assert "for the command trial" in trial
    assert all(f'"{law}"' in trial for law in (*get_args(LawName), "file.py:Name"))
    assert "arm_gives" in section("contact")


@pytest.mark.parametrize("name", BALLS)
def test_every_ball_stands_in_it_with_its_source(name: str) -> None:
    text = " ".join(keys_text().partition("\nBALLS")[2].partition("LIMITS FILE")[0].split())
    ball = BALLS[name]
    assert f"{name} {ball.mass_kg:g} kg, radius {ball.radius_m:g} m ({ball.source})" in text


def test_every_drop_test_stands_in_it() -> None:
    text = " ".join(keys_text().partition("\nBALLS")[2].partition("LIMITS FILE")[0].split())
    assert "belongs to the pair" in text
    for test in REBOUND:
        low, high = test.restitution
        assert f"restitution {low:.3f} to {high:.3f} on {test.onto} ({test.source})" in text
