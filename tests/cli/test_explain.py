"""The command ``explain``: exit status, JSON, wrong input."""

import inspect
import json

import pytest

from solverkit.cli.commands import application
from solverkit.cli.explain_command import explain
from solverkit.errors import InputError

RUN = application()


@pytest.fixture
def run(capsys):
    def called(*arguments):
        status = RUN(args=["explain", *arguments], standalone_mode=False)
        out, err = capsys.readouterr()
        assert not err
        return status, out

    return called


@pytest.fixture
def document(run):
    def called(*arguments, status=0):
        code, out = run(*arguments, "--format", "json")
        assert code == status
        return json.loads(out)

    return called


def test_json_of_an_empty_cell(document):
    told = document("--map", "3,1", "--cell", "24,15")
    assert (told["schema"], told["status"], told["complete"], told["cycles"]) == (1, "none", True, [])
    assert ["step", "closing", "odd count"] in told["cores"]
    assert len({len(core) for core in told["cores"]}) == 1
    assert len(told["reach"]["cores"]) == len(told["cores"])
    assert told["cell"] == {
        "multiplier": 3, "offset": 1, "length": 24, "odd": 15, "above": 0, "sign": "positive",
    }  # fmt: skip


def test_the_cell_is_reflected_and_reduced_unless_raw(document):
    told = document("--map", "3,-203", "--sign", "negative", "--cell", "21,13", "--above", "1000")
    assert (told["factor"], told["explained"]["offset"], told["explained"]["above"]) == (-203, 1, 1000 // 203)
    raw = document("--map", "3,-203", "--sign", "negative", "--cell", "21,13", "--above", "1000", "--raw")
    assert (raw["factor"], raw["explained"]["offset"], raw["explained"]["above"]) == (-1, 203, 1000)
    assert told["status"] == raw["status"] == "none"


def test_all_cores_are_at_least_the_smallest_ones(document):
    few = document("--map", "3,1", "--cell", "11,6", "--above", "0")["cores"]
    many = document("--map", "3,1", "--cell", "11,6", "--all-cores")["cores"]
    assert {tuple(core) for core in few} <= {tuple(core) for core in many}


def test_text_names_the_cell_and_what_was_not_needed(run):
    status, out = run("--map", "3,29", "--cell", "27,17", "--above", "1000")
    assert status == 0
    lines = out.splitlines()
    assert lines[0] == "cell: 3x+1, positive elements above 34, length 27, odd steps 17"
    assert lines[1] == "its elements times 29 are those of the cell asked for"
    assert "no cycle: the closing condition and the odd count 17 alone exclude it" in out
    assert "the lower bound B = 34" in out


def test_a_wrong_sign_is_arithmetic_of_the_cell_asked_for(document):
    told = document("--map", "3,35", "--cell", "24,20")
    assert (told["arithmetic"], told["cores"], told["explained"]["offset"]) == ("sign", [], 35)
    assert "d = 35" in told["words"][0]


def test_cycles_are_listed(document):
    told = document("--map", "3,5", "--cell", "27,17")
    assert told["status"] == "found"
    assert [(cycle["least"], cycle["word"][:6], cycle["circuits"]) for cycle in told["cycles"]] == [
        (187, "111111", 6),
        (347, "111110", 7),
    ]
    assert told["reach"]["empty_above"] == 347


def test_time_limit_gives_status_3(document):
    told = document("--map", "3,-191137", "--cell", "56,37", "--seconds", "0.5", status=3)
    assert (told["status"], told["complete"]) == ("open", False)
    assert told["words"][-1] == "incomplete: 0.5 s were not enough"


@pytest.mark.parametrize(
    ("arguments", "field"),
    [
        (["--map", "3,1..9", "--cell", "8,5"], "the window"),
        (["--map", "3,1", "--sign", "both", "--cell", "8,5"], "the window"),
        (["--map", "3,1", "--cell", "8"], "--cell"),
        (["--map", "3,1", "--cell", "8,9"], "--cell X"),
        (["--map", "3,1", "--lengths", "1..7", "--cell", "8,5"], "--cell K"),
        (["--map", "3,1", "--cell", "8,5", "--seconds", "0"], "--seconds"),
    ],
)
def test_wrong_input_names_the_field(run, arguments, field):
    with pytest.raises(InputError) as caught:
        run(*arguments)
    assert caught.value.field == field


def test_every_option_has_a_help_text():
    for parameter in inspect.signature(explain).parameters.values():
        (option,) = parameter.annotation.__metadata__
        assert option.help
