"""Formulas of the user's own from TOML files, and every way in which such a file is refused."""

from __future__ import annotations

import pytest

import trueturn as tt
from trueturn import errors
from trueturn.formulas import read_formulas

OUTER = "1.351207191959657634047687808971460826922"
INNER = "-1.702414383919315268095375617942921653844"
JUMP = f'weights = ["{OUTER}", "{INNER}", "{OUTER}"]'
SEVERAL = f"""
[[formula]]
name = "jump"
order = 4
source = "notebook, page 3"
{JUMP}

[[formula]]
name = "leapfrog"
a = ["0.5", 0.5]
b = [1]

[[formula]]
name = "one way"
stages = [["0.5", "forward"], [0.5, "forward"]]
"""


@pytest.fixture
def write(tmp_path):
    def written(text):
        path = tmp_path / "mine.toml"
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return path

    return written


def test_a_file_may_hold_several_formulas_of_each_shape(write):
    jump, leapfrog, one_way = read_formulas(write(SEVERAL))
    assert (jump.name, jump.order, jump.source) == ("jump", 4, "notebook, page 3")
    assert jump.stages == tt.formula("triple-jump-4").stages
    assert (leapfrog.order, leapfrog.stages) == (2, tt.formula("strang").stages)
    assert leapfrog.source == "read from mine.toml"
    assert (one_way.order, one_way.symmetric, len(one_way.stages)) == (1, False, 2)
    assert "jump" not in tt.formulas()


def test_a_file_of_one_formula_needs_no_section(write):
    path = write(f'name = "jump"\n{JUMP}')
    assert tt.Formula.read(path) == tt.Formula.read(str(path)) == read_formulas(path)[0]
    assert tt.Formula.read(path).order == 4


@pytest.mark.parametrize(
    ("text", "key", "message"),
    [
        ("", "formula", "formula: is missing; begin a formula with a line [[formula]]"),
        ("formula = 3", "formula", "formula: is no list of formulas; begin each with a line [[formula]]"),
        ("formula = []", "formula", "formula: is no list of formulas; begin each with a line [[formula]]"),
        (f'order = 4\n[[formula]]\nname = "j"\n{JUMP}', "order", "order: stands outside of a formula; move it below"),
        (JUMP, "name", 'name: is missing; add name = "my-4"'),
        (f"name = 4\n{JUMP}", "name", 'name: is of the wrong type (4); write name = "my-4"'),
        (f'name = " "\n{JUMP}', "name", "name: is not a name (' '); give a text that is not empty"),
        (f'name = "j"\norder = "4"\n{JUMP}', "order", "order: is of the wrong type ('4'); write order = 4"),
        (f'name = "j"\norder = true\n{JUMP}', "order", "order: is of the wrong type (True); write order = 4"),
        (f'name = "j"\nsource = 1\n{JUMP}', "source", "source: is of the wrong type (1); write source ="),
        (f'name = "j"\nwieghts = []\n{JUMP}', "wieghts", "wieghts: is an unknown key; did you mean weights?"),
        (f'name = "j"\nzzz = 1\n{JUMP}', "zzz", "zzz: is an unknown key; known: name, order, source, weights, a, b"),
        (f'name = "strang"\n{JUMP}', "name", "name: is the name of a known formula ('strang'); choose another"),
        (f'name = "suzuki-10"\n{JUMP}', "name", "name: is the name of a known formula ('suzuki-10'); choose another"),
        ('name = "j"', "weights", "weights: has no weights; give exactly one of: weights; a and b; stages"),
        ('name = "j"\na = [1]', "a", "a: has a; give exactly one of: weights; a and b; stages"),
        (f'name = "j"\na = [1]\n{JUMP}', "a", "a: has a and weights; give exactly one of"),
        ('name = "j"\nweights = [0.5, 0.6]', "weights", "weights: do not sum to 1 (1.1); divide by the sum"),
        ('name = "j"\nweights = ["x"]', "weights", "weights: entry 0 is not a finite number ('x'); give finite"),
        ('name = "j"\nweights = [inf]', "weights", "weights: entry 0 is not a finite number (inf); give finite"),
        ('name = "j"\nweights = 1', "weights", "weights: is not a list of weights (1); give finite numbers"),
        ('name = "j"\nweights = []', "weights", "weights: is empty ([]); give finite numbers"),
        ('name = "j"\na = [1]\nb = [1, 0]', "a", "a: do not fit in length (1, 2); give as many, or one a more"),
        ('name = "j"\na = [1]\nb = [2]', "b", "b: do not sum to 1 (2.0); divide by the sum"),
        ('name = "j"\nstages = [0.5]', "stages", "stages: holds what is no stage (0.5); write stages = [["),
        ('name = "j"\nstages = 1', "stages", "stages: holds what is no stage (1); write stages = [["),
        ('name = "j"\nstages = [[1, "up"]]', "stages", "stages: holds what is no stage ([1, 'up']); write stages"),
        ('name = "j"\nstages = [[1, []]]', "stages", "stages: holds what is no stage ([1, []]); write stages"),
        ('name = "j"\nstages = [[2, "forward"]]', "stages", "stages: do not sum to 1 (2.0); divide by the sum"),
        (f'name = "j"\norder = 6\n{JUMP}', "order", "order: is not reached (6 claimed, 4 measured"),
        (f'name = "j"\norder = 14\n{JUMP}', "order", "order: is not an integer from 1 to 12 (14); give one"),
        (f"{SEVERAL}order = 3", "formula[3].order", "formula[3].order: is not reached (3 claimed, 1 measured"),
        (
            SEVERAL.replace('"leapfrog"', '"jump"'),
            "formula[2].name",
            "formula[2].name: is given twice ('jump'); give each formula a name of its own",
        ),
        ("name = ", "", "formula file: is not valid TOML (Invalid value"),
        (b"\xff", "", "formula file: is not UTF-8 text (byte 0)"),
    ],
)
def test_a_bad_file_is_refused_with_path_and_key(write, text, key, message):
    path = write(text)
    with pytest.raises(errors.JobError) as caught:
        read_formulas(path)
    assert str(caught.value).startswith(message)
    assert (caught.value.path, caught.value.key) == (str(path), key)
    assert ";" in str(caught.value)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (f'name = "suzuki-99"\n{JUMP}', "name: is kept for Suzuki's family ('suzuki-99'); choose another"),
        (f'name = "j"\nsymmetric = 1\n{JUMP}', "symmetric: is of the wrong type (1); write symmetric = true or"),
        (f'name = "j"\nsymmetric = false\n{JUMP}', "symmetric: is false (false claimed; the stages are a palindrome)"),
        (
            'name = "j"\nsymmetric = true\nstages = [[0.5, "forward"], [0.5, "forward"]]',
            "symmetric: is false (true claimed; a stage and its mirror image have the same direction); make one",
        ),
        (f"name = 1{'0' * 5000}", "formula file: cannot be read (Exceeds the limit"),
        (f"name = {'[' * 20000}", "formula file: cannot be read ("),
        (f'name = "j"\nweights = [{"1" * 4000}]', "weights: entry 0 is above 1e100 in size (1111"),
    ],
    ids=["kept", "type", "false", "direction", "digits", "nested", "large"],
)
def test_a_false_claim_and_a_file_beyond_all_limits_are_refused(write, text, message):
    with pytest.raises(errors.JobError) as caught:
        read_formulas(write(text))
    assert str(caught.value).startswith(message)
    assert len(str(caught.value)) < 300


def test_symmetry_is_checked_against_the_stages(write):
    assert tt.Formula.read(write(f'name = "suzuki-like"\nsymmetric = true\n{JUMP}')).symmetric
    assert not tt.Formula.read(write('name = "l"\nsymmetric = false\nstages = [[1, "forward"]]')).symmetric
    # the last weight is cut in its last digit
    cut = 'name = "j"\nsymmetric = true\nweights = ["0.268330000000001", "0.463339999999999", "0.26833"]'
    with pytest.raises(errors.JobError) as caught:
        tt.Formula.read(write(cut))
    assert str(caught.value).startswith("symmetric: is false (true claimed; stages 1 and 6 have the weights 0.13416500")
    assert str(caught.value).endswith("; give mirrored weights the same digits, or take the key out")
    assert caught.value.key == "symmetric"


def test_what_is_no_path_is_refused():
    with pytest.raises(errors.ArgumentError, match=r"path: is no path \(3\); give the name of a TOML file"):
        read_formulas(3)


def test_a_formula_that_is_refused_stays_attached_as_the_cause(write):
    with pytest.raises(errors.JobError) as caught:
        read_formulas(write(f'name = "j"\norder = 6\n{JUMP}'))
    assert isinstance(caught.value.__cause__, errors.FormulaError)


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(errors.JobError, match=r"^formula file: cannot be read \(No such file.*absent.toml; check"):
        read_formulas(tmp_path / "absent.toml")


def test_a_single_formula_is_not_read_from_a_file_of_several(write):
    with pytest.raises(
        errors.JobError,
        match=r"^formula: holds 3 formulas \(jump, leapfrog, one way\); read them with trueturn.read_formulas$",
    ):
        tt.Formula.read(write(SEVERAL))
