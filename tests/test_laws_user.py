"""Laws by name, their gains, and a user's law with every way in which it can fail."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any, get_args

import numpy as np
import pytest
from ideal_paddle import BEARINGS, STILL, leaving, rally, setup_for

from reach.cell import Contact, LawName, Trial
from reach.errors import InputError
from reach.trial.laws import LAWS, Law, LawFault, Seen, aside, asked, gains_of, law_class, made

OWN_LAW = Path(__file__).parents[1] / "examples" / "wear_bench" / "own_law.py"


def test_the_laws_are_those_a_cell_can_name() -> None:
    assert tuple(LAWS) == get_args(LawName)
    for name, law in LAWS.items():
        assert law_class(Trial(law=name)) is law and issubclass(law, Law)
        assert gains_of(law, Trial(law=name), "cell.toml") == law.gains


def test_a_cell_sets_gains_and_no_others() -> None:
    trial = Trial(law="mirror", gains=(("energy", 1.0),))
    assert gains_of(LAWS["mirror"], trial, "cell.toml") == {**LAWS["mirror"].gains, "energy": 1.0}
    trial = replace(trial, gains=(("enrgy", 1.0), ("zzz", 2.0)))
    with pytest.raises(InputError) as caught:
        gains_of(LAWS["mirror"], trial, "cell.toml")
    first, second = map(str, caught.value.faults)
    told = 'cell.toml: trial.gains.enrgy: "enrgy" is no gain of the law "mirror"; did you mean "energy"?'
    assert first == told
    assert second.startswith('cell.toml: trial.gains.zzz: "zzz" is no gain of the law "mirror"; known here: ')
    with pytest.raises(
        InputError, match=r'cell.toml: trial.law: there is no law "miror"; did you mean "mirror"'
    ):
        law_class(Trial(law="miror"), "cell.toml")


def own(file: Path, text: str, name: str = "Mine") -> Trial:
    file.write_text(text, encoding="utf-8")
    return Trial(law=name, law_file=str(file))


@pytest.mark.parametrize("bearing", BEARINGS)
def test_the_example_of_an_own_law_keeps_a_ball_up(bearing: float) -> None:
    trial = Trial(law="OwnLaw", law_file=str(OWN_LAW), apex_m=0.3)
    found = rally(trial, Contact(0.85, friction=0.2), *leaving(0.3, 0.08, bearing), 30)
    assert len(found) == 30
    for bounce in found[10:]:
        assert (
            bounce.off_m < 0.02 and abs(bounce.apex_m - 0.3) < 0.03
        )  # as [trial.recovered] has it by default


HEAD = "import dataclasses\n\n\nclass Mine:\n    def __init__(self, setup):\n        self.setup = setup\n\n"
LOADS = [
    ("class Other:\n    pass\n", "line 1", 'there is no class "Mine"; known here: "Other"'),
    ("class Mind:\n    pass\n", "line 1", 'there is no class "Mine"; did you mean "Mind"?'),
    ("x = 1\n", "line 1", 'there is no class "Mine"; it has no class at all'),
    (
        "x = 1\n\nMine = 3\n",
        "line 3",
        '"Mine" is no class but of type int; name a class with a method "twist"',
    ),
    ("\n\nclass Mine:\n    gains = {}\n", "line 3", '"Mine" has no method "twist(self, seen)"'),
    ("x = 1\ny = 1 / 0\n", "line 2", "fails while it is loaded: ZeroDivisionError: division by zero"),
    ("x = 1\nclass Mine(:\n", "line 2", "fails while it is loaded: SyntaxError: "),
    ("import sys\nsys.exit(3)\n", "line 2", "fails while it is loaded: SystemExit: 3"),
    ("import no_such_module_at_all\n", "line 1", "fails while it is loaded: ModuleNotFoundError: "),
]


@pytest.mark.parametrize(("text", "where", "what"), LOADS)
def test_a_file_without_the_law_is_bad_input(tmp_path: Path, text: str, where: str, what: str) -> None:
    trial = own(tmp_path / "mine.py", text)
    with pytest.raises(InputError) as caught:
        law_class(trial)
    (fault,) = caught.value.faults
    assert (fault.file, fault.where) == (trial.law_file, where)
    assert fault.what.startswith(what)


def test_a_file_that_is_not_there_is_bad_input(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"gone\.py: line 1: fails while it is loaded: FileNotFoundError"):
        law_class(Trial(law="Mine", law_file=str(tmp_path / "gone.py")))


@pytest.mark.parametrize("gains", ["[1.0]", "{1: 2.0}", "{'a': 'b'}", "{'a': float('nan')}", "{'a': True}"])
def test_gains_that_are_no_numbers_by_name_are_bad_input(tmp_path: Path, gains: str) -> None:
    text = f"x = 1\nclass Mine:\n    gains = {gains}\n    def twist(self, seen):\n        return (0.0,) * 6\n"
    trial = own(tmp_path / "mine.py", text)
    with pytest.raises(InputError, match=r"mine\.py: line 2: .*\"gains\""):
        gains_of(law_class(trial), trial, "cell.toml")


def test_a_law_is_loaded_as_it_stands_and_leaves_nothing_behind(tmp_path: Path) -> None:
    text = HEAD + "    def twist(self, seen):\n        return [0, 0, {0}, 0, 0, 0]\n"
    # Postponed annotations make dataclasses look their module up, which must be there.
    text = (
        "from __future__ import annotations\n"
        + text
        + "\n\n@dataclasses.dataclass\nclass Kept:\n    x: int = 0\n"
    )
    for value in (1, 2):
        trial = own(tmp_path / "mine.py", text.replace("{0}", str(value)))
        law = made(law_class(trial), setup_for(trial, Contact(0.8)))
        assert asked(law, STILL) == (0.0, 0.0, value, 0.0, 0.0, 0.0)
    assert [entry.name for entry in tmp_path.iterdir()] == ["mine.py"]
    with pytest.raises(InputError, match='"speed" is no gain of the law "Mine"; it has none'):
        gains_of(law_class(trial), replace(trial, gains=(("speed", 1.0),)), "cell.toml")


@pytest.mark.parametrize(
    "answer",
    ["(1, 2.0, 3, 4, 5, 6)", "[1, 2, 3, 4, 5, 6]", "np.arange(1.0, 7.0)", "np.arange(1, 7, dtype='f4')"],
)
def test_six_finite_numbers_are_an_answer(tmp_path: Path, answer: str) -> None:
    trial = own(
        tmp_path / "mine.py",
        f"import numpy as np\n{HEAD}    def twist(self, seen):\n        return {answer}\n",
    )
    twist = asked(made(law_class(trial), setup_for(trial, Contact(0.8))), STILL)
    assert twist == (1, 2, 3, 4, 5, 6)
    assert {type(part) for part in twist} == {float}


BAD = [
    "None",
    "1.0",
    "(0.0,) * 5",
    "[0.0] * 7",
    "['0.0'] * 6",
    "'000000'",
    "np.zeros((6, 1))",
    "np.zeros((1, 6))",
]
BAD += [
    "np.full(6, np.nan)",
    "(0, 0, 0, 0, 0, float('inf'))",
    "np.zeros(6, complex)",
    "np.array(['0'] * 6)",
    "object()",
    "dict.fromkeys(range(6), 0.0)",
    "{1.0, 2.0, 3.0, 4.0, 5.0, 6.0}",
    "iter((0.0,) * 6)",
    "bytes(6)",
]


@pytest.mark.parametrize("answer", BAD)
def test_anything_else_is_a_fault_with_its_line(tmp_path: Path, answer: str) -> None:
    trial = own(
        tmp_path / "mine.py",
        f"import numpy as np\n{HEAD}    def twist(self, seen):\n        return {answer}\n",
    )
    law = made(law_class(trial), setup_for(trial, Contact(0.8)))
    with pytest.raises(LawFault) as caught:
        asked(law, STILL)
    assert caught.value.text.startswith("twist must be six finite numbers, got ")
    assert caught.value.text.endswith(" (mine.py line 9)")
    assert caught.value.line == 9


def test_what_a_law_raises_is_told_with_its_line(tmp_path: Path) -> None:
    body = "    def twist(self, seen):\n        return self.inner()\n\n    def inner(self):\n"
    for statement, told in (
        ("raise ValueError('bad gain')", "ValueError: bad gain (mine.py line 12)"),
        ("return [].pop()", "IndexError: pop from empty list (mine.py line 12)"),
        ("raise SystemExit", "SystemExit (mine.py line 12)"),
        (
            "return dataclasses.replace(1)",
            "TypeError: replace() should be called on dataclass instances (mine.py line 12)",
        ),
    ):
        trial = own(tmp_path / "mine.py", f"{HEAD}{body}        {statement}\n")
        with pytest.raises(LawFault) as caught:
            asked(made(law_class(trial), setup_for(trial, Contact(0.8))), STILL)
        assert str(caught.value) == caught.value.text == told
        assert caught.value.line == 12
    trial = own(
        tmp_path / "mine.py",
        HEAD.replace("self.setup = setup", "self.x = setup.nothing") + body + "        pass\n",
    )
    with pytest.raises(LawFault, match=r"AttributeError: .*nothing.* \(mine\.py line 6\)"):
        made(law_class(trial), setup_for(trial, Contact(0.8)))


@pytest.mark.parametrize("part", [1000.0, -1000.0, 1000])
@pytest.mark.parametrize("place", [0, 5])
def test_a_twist_within_1000_is_an_answer(part: float, place: int) -> None:
    twist = [0.0] * 6
    twist[place] = part
    assert asked(Answering(twist), STILL) == tuple(twist)


@pytest.mark.parametrize("part", [1000.0001, -1e4, 1e100, -1e200, 10**9])
@pytest.mark.parametrize("place", range(6))
@pytest.mark.parametrize("kind", [tuple, list, np.array])
def test_a_twist_beyond_all_measure_is_a_fault(part: float, place: int, kind: Callable[..., Any]) -> None:
    twist: list[float] = [0.0] * 6
    twist[place] = part
    with pytest.raises(LawFault) as caught:
        asked(Answering(kind(twist)), STILL)
    told = "twist must be six finite numbers within ±1000 m/s and rad/s, got "
    assert caught.value.text.startswith(told) and caught.value.line > 0


class Answering:
    """A law with one answer."""

    def __init__(self, answer: Any):
        self.answer = answer

    def twist(self, seen: Seen) -> Any:
        return self.answer


# A file runs once, and what it prints goes aside


COUNTS = """print("loaded")
with open(__file__ + ".count", "a") as stream:
    stream.write("x")
class Mine:
    def __init__(self, setup):
        print("made")
    def twist(self, seen):
        return (0.0,) * 6
class Other(Mine):
    pass
"""


def test_a_file_runs_once_a_process_and_again_when_it_has_changed(tmp_path: Path) -> None:
    trial = own(tmp_path / "mine.py", COUNTS)
    first, again, other = (law_class(replace(trial, law=name)) for name in ("Mine", "Mine", "Other"))
    count = tmp_path / "mine.py.count"
    assert first is again and issubclass(other, first) and count.read_text() == "x"
    for file in (tmp_path / "mine.py", tmp_path / "copy.py"):
        changed = law_class(own(file, COUNTS.replace("0.0", "1.0")))
        assert asked(made(changed, setup_for(trial, Contact(0.8))), STILL) == (1.0,) * 6
    assert count.read_text() == "xx"
    assert law_class(own(tmp_path / "mine.py", COUNTS)) is first
    assert sys.modules[first.__module__].__dict__["Mine"] is first and count.read_text() == "xx"


def test_a_file_that_failed_is_tried_again(tmp_path: Path) -> None:
    text = "import os\nif not os.path.exists(__file__ + '.there'):\n    raise OSError('not yet')\n"
    trial = own(tmp_path / "mine.py", text + COUNTS)
    with pytest.raises(InputError, match="not yet"):
        law_class(trial)
    (tmp_path / "mine.py.there").touch()
    assert law_class(trial).__name__ == "Mine"


def test_what_a_law_prints_as_it_is_loaded_and_made_goes_to_standard_error(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    trial = own(tmp_path / "mine.py", COUNTS)
    made(law_class(trial), setup_for(trial, Contact(0.8)))
    told = capsys.readouterr()
    assert (told.out, told.err) == ("", "loaded\nmade\n")
    with aside():
        print("asked")
    assert capsys.readouterr() == ("", "asked\n")


# The line of a law that has its methods from elsewhere


INHERITS = "from reach.trial.laws.mirror import Mirror\n\n\nclass Mine(Mirror):\n"
BAD_INIT = (
    "    def __init__(self, setup):\n        super().__init__(setup)\n        self.gain = setup.nothing\n"
)


def test_a_failing_init_tells_its_line_where_twist_is_inherited(tmp_path: Path) -> None:
    trial = own(tmp_path / "mine.py", INHERITS + BAD_INIT)
    with pytest.raises(LawFault, match=r"AttributeError: .*nothing.* \(mine\.py line 7\)") as caught:
        made(law_class(trial), setup_for(trial, Contact(0.8)))
    assert caught.value.line == 7


def test_a_method_that_an_inherited_twist_calls_tells_its_line(tmp_path: Path) -> None:
    """The innermost line of the class's own file, though the built-in law lies between."""
    text = INHERITS + "    @staticmethod\n    def _height(b, vz):\n        return 1 / 0\n"
    trial = own(tmp_path / "mine.py", text)
    with pytest.raises(LawFault, match=r"ZeroDivisionError: division by zero \(mine\.py line 7\)"):
        asked(made(law_class(trial), setup_for(trial, Contact(0.8))), STILL)


def test_a_fault_within_an_inherited_method_tells_the_line_of_the_base(tmp_path: Path) -> None:
    trial = own(tmp_path / "mine.py", INHERITS + "    gains = {}\n")
    with pytest.raises(LawFault, match=r"KeyError: .* \(mirror\.py line \d+\)"):
        made(law_class(trial), setup_for(trial, Contact(0.8)))
