"""Job files: what is read, and how each mistake is refused."""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest

from trueturn import lattice, model
from trueturn.audit import job as job_module
from trueturn.audit.job import Job, built_in_job, read_job, template
from trueturn.errors import JobError, TermError, TrueturnError
from trueturn.operator import Operator

GOOD = """
[system]
terms = "-1.0 Z_0 Z_1 + 0.5 X_0"

[start]
product = "0+"

[target]
times = [0.5, 1.0]
tolerance = 0.01

[target.observables]
edge = "Z_0"

[[candidate]]
formula = "strang"
steps = 4
"""


@pytest.fixture
def write(tmp_path: Path):
    def write(text: str) -> Path:
        path = tmp_path / "job.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return write


@pytest.fixture
def read(write):
    def read(*changes: tuple[str, str], text: str = GOOD, **options) -> Job:
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        return read_job(write(text), **options)

    return read


def test_a_small_job_is_read_with_its_defaults(read) -> None:
    job = read()
    assert job.operator == Operator("-1.0 Z_0 Z_1 + 0.5 X_0") and job.operator.qubits == 2
    assert job.start.sites == ("0", "+") and job.start.words == "product state 0+, qubit 0 first"
    assert job.times == (0.5, 1.0) and job.tolerance == 0.01
    assert (job.quantity, job.readout, job.relative_to) == ("observables", "along", None)
    assert dict(job.observables) == {"edge": Operator("Z_0")} and job.observables["edge"].qubits == 2
    assert [(one.formula.name, one.rule, one.steps) for one in job.candidates] == [("strang", "commuting", 4)]
    assert (job.reference_tolerance, job.reference_method) == (None, "chebyshev")
    assert (job.folder, job.threads, job.title, job.energy_unit) == (None, None, "job", "")


def test_every_key_is_taken_over(read) -> None:
    job = read(
        ("times = [0.5, 1.0]", 'time = 2\nreadout = "separate"\nrelative_to = "norm"'),
        ("steps = 4", 'rule = "single"'),
        (
            "[start]",
            '[reference]\ntolerance = 1e-8\nmethod = "chebyshev"\n[output]\nfolder = "out"\n'
            '[run]\nthreads = 2\nmost_steps = 99\ntitle = "T"\nenergy_unit = "J"\n[start]',
        ),
    )
    assert job.times == (2.0,)
    assert (job.readout, job.relative_to) == ("separate", "norm")
    assert (job.candidates[0].rule, job.candidates[0].steps) == ("single", "least")
    assert job.reference_tolerance == 1e-8
    assert job.path is not None and job.folder == job.path.parent / "out"
    assert (job.threads, job.most_steps, job.title, job.energy_unit) == (2, 99, "T", "J")


def test_a_job_is_frozen(read) -> None:
    with pytest.raises(AttributeError):
        read().tolerance = 1.0


def test_the_template_is_the_built_in_job(write) -> None:
    from_file, built_in = read_job(write(template())), built_in_job()
    assert built_in.path is None
    same = [name for name in vars(built_in) if name != "path" and vars(from_file)[name] == vars(built_in)[name]]
    assert len(same) == len(vars(built_in)) - 1
    assert built_in.operator.qubits == 18 and "invented" in built_in.title
    assert len(built_in.candidates) >= 4


def test_the_template_names_every_key(write) -> None:
    text = template()
    for word in (
        "terms",
        "file",
        "extra",
        "qubits",
        "product",
        "readout",
        "relative_to",
        "method",
        "folder",
        "threads",
    ):
        assert f"{word} =" in text, word
    assert set(tomllib.loads(text)) <= set(job_module.SECTIONS)


def test_the_built_in_ladder_starts_ordered() -> None:
    start = built_in_job().start.sites
    assert start is not None
    assert all({start[2 * rung], start[2 * rung + 1]} == {"0", "1"} for rung in range(9))
    assert all(start[site] != start[site + 2] for site in range(16))


SYSTEMS = {
    'model = "ising"\nlattice = "chain"\nsites = 4\nzz = -1.0\nx = 0.5': lambda: model.ising(
        lattice.chain(4), zz=-1.0, x=0.5
    ),
    'model = "ising"\nbonds = [[0, 1], [2, 1], [2, 3]]\nzz = [1.0, 2.0, 3]\nx = 0.5\nz = 1': lambda: model.ising(
        lattice.from_bonds([(0, 1), (2, 1), (2, 3)]), zz=[1.0, 2.0, 3.0], x=0.5, z=1.0
    ),
    'model = "exchange"\nlattice = "square"\nrows = 2\ncolumns = 2\nperiodic = true\nxx = 1\nyy = 1\nzz=2': (
        lambda: model.exchange(lattice.square(2, 2, periodic=True), xx=1.0, yy=1.0, zz=2.0)
    ),
    'model = "heisenberg"\nlattice = "ring"\nsites = 4\ncoupling = 1\nspin = "half"': lambda: model.heisenberg(
        lattice.ring(4), 1.0, spin="half"
    ),
    'model = "hubbard"\nlattice = "chain"\nsites = 2\nhopping = 1\nrepulsion = 4\npotential = 2': (
        lambda: model.hubbard(lattice.chain(2), 1.0, 4.0, potential=2.0)
    ),
    'model = "ising"\nlattice = "complete"\nsites = 4\nzz = 1\nx = 1\nextra = "0.5 Z_0 - 0.25"': (
        lambda: model.ising(lattice.complete(4), zz=1.0, x=1.0) + Operator("0.5 Z_0 - 0.25")
    ),
    'terms = "0.5 X_0"\nqubits = 4': lambda: Operator("0.5 X_0", qubits=4),
}


@pytest.mark.parametrize("text", SYSTEMS)
def test_a_model_is_what_the_library_makes(read, text: str) -> None:
    job = read(('terms = "-1.0 Z_0 Z_1 + 0.5 X_0"', text), ('product = "0+"', 'pattern = "01"'))
    expected = SYSTEMS[text]()
    assert job.operator == expected and job.operator.qubits == expected.qubits
    assert job.start.sites == ("0", "1", "0", "1")


def test_a_ladder_takes_strengths_of_legs_and_rungs(read) -> None:
    text = 'model = "exchange"\nlattice = "ladder"\nrungs = 2\nxx = { legs = 2, rungs = 3 }\nyy = 0\nzz = 0'
    job = read(('terms = "-1.0 Z_0 Z_1 + 0.5 X_0"', text), ('product = "0+"', 'pattern = "0"'))
    assert job.operator == Operator("3 X_0 X_1 + 2 X_0 X_2 + 2 X_1 X_3 + 3 X_2 X_3")


def test_a_terms_file_is_found_beside_the_job(read, tmp_path: Path) -> None:
    Operator("0.5 X_0 Z_1", qubits=2).write(tmp_path / "own.terms")
    assert read(('terms = "-1.0 Z_0 Z_1 + 0.5 X_0"', 'file = "own.terms"')).operator == Operator("0.5 X_0 Z_1")
    wider = read(
        ('terms = "-1.0 Z_0 Z_1 + 0.5 X_0"', 'file = "own.terms"\nqubits = 3'),
        ('product = "0+"', 'pattern = "0"'),
    )
    assert wider.operator.qubits == 3


def test_a_start_file_is_checked_without_being_used(read, tmp_path: Path) -> None:
    np.save(tmp_path / "start.npy", np.array([1, 0, 0, 0], dtype=np.complex128))
    job = read(('product = "0+"', 'file = "start.npy"'))
    assert job.start.sites is None and job.start.words == "amplitudes from the file start.npy"
    np.save(tmp_path / "start.npy", np.zeros(8, dtype=np.complex128))
    with pytest.raises(JobError, match=r"start.file: holds an array of the wrong shape for 2 qubits \(\(8,\)\)"):
        read(('product = "0+"', 'file = "start.npy"'))
    np.save(tmp_path / "start.npy", np.zeros(4))
    with pytest.raises(JobError, match=r"start.file: not complex amplitudes \(float64\); save them as complex128"):
        read(('product = "0+"', 'file = "start.npy"'))
    (tmp_path / "start.npy").write_text("no array")
    with pytest.raises(JobError, match=r"start.file: not a NumPy .npy file"):
        read(('product = "0+"', 'file = "start.npy"'))


def test_a_start_list_takes_words_and_angles(read) -> None:
    job = read(('product = "0+"', 'product = ["+i", [1.5, -0.5]]'))
    assert job.start.sites == ("+i", (1.5, -0.5))
    assert job.start.words == "product state +i (1.5, -0.5), qubit 0 first"


def test_a_reference_needs_no_candidates(read) -> None:
    text = GOOD[: GOOD.index("[[candidate]]")]
    with pytest.raises(JobError, match=r"candidate: missing; add \[\[candidate\]\]"):
        read(text=text)
    assert read(text=text, candidates_required=False).candidates == ()


def test_rules_are_those_of_the_library() -> None:
    from trueturn.partition import Partition
    from trueturn.partition_rules import RULES

    for rule in RULES:
        assert Partition.of(Operator("1.0 Z_0 Z_1 + 0.5 X_0"), rule).parts


SYSTEM = 'terms = "-1.0 Z_0 Z_1 + 0.5 X_0"'
ISING = 'model = "ising"\nlattice = "chain"\nsites = 2\nzz = 1\nx = 1'
BAD = [
    # old text, new text, key, message
    ("[system]", "[sistem]", "sistem", "unknown section; did you mean system?"),
    ("[system]", "[zzz]", "zzz", "unknown section; known: system, start, target,"),
    ("tolerance", "tolerence", "target.tolerence", "unknown key; did you mean tolerance?"),
    ("tolerance = 0.01", "", "target.tolerance", "missing; add tolerance = 0.01"),
    ("0.01", "0", "target.tolerance", "not above zero (0.0); write tolerance = 0.01"),
    ("0.01", "-1e-3", "target.tolerance", "not above zero (-0.001);"),
    ("0.01", "nan", "target.tolerance", "not finite (nan);"),
    ("0.01", "inf", "target.tolerance", "not finite (inf);"),
    ("0.01", "true", "target.tolerance", "not a number but true/false (True);"),
    ("0.01", '"1 %"', "target.tolerance", "not a number but a text ('1 %');"),
    ("0.01", "1979-05-27", "target.tolerance", "not a number but a date or time"),
    ("times = [0.5, 1.0]", "", "target.times", "missing; write times = [0.5, 1.0], or time = 1.0"),
    ("times = [0.5, 1.0]", "times = [1.0]\ntime = 1.0", "target.times", "given together with time;"),
    ("[0.5, 1.0]", "[]", "target.times", "empty; write times = [0.5, 1.0]"),
    ("[0.5, 1.0]", "1.0", "target.times", "not a list (1.0);"),
    ("[0.5, 1.0]", "[1.0, 0.5]", "target.times", "not ascending from above zero ([1.0, 0.5]);"),
    ("[0.5, 1.0]", "[0.0, 0.5]", "target.times", "not ascending from above zero"),
    ("[0.5, 1.0]", "[0.5, 0.5]", "target.times", "not ascending from above zero"),
    ("[0.5, 1.0]", '[0.5, "1"]', "target.times", "entry 1 is not a number but a text ('1');"),
    ("times = [0.5, 1.0]", "time = 0", "target.time", "not above zero (0.0);"),
    (
        "tolerance = 0.01",
        'tolerance = 0.01\nquantity = "energy"',
        "target.quantity",
        "unknown ('energy'); known:",
    ),
    ("tolerance = 0.01", 'tolerance = 0.01\nquantity = "stat"', "target.quantity", "did you mean state?"),
    (
        "tolerance = 0.01",
        'tolerance = 0.01\nreadout = "seperate"',
        "target.readout",
        "did you mean separate?",
    ),
    (
        "tolerance = 0.01",
        "tolerance = 0.01\nrelative_to = 1",
        "target.relative_to",
        "not a text but a whole number",
    ),
    (
        "tolerance = 0.01",
        'tolerance = 0.01\nquantity = "state"\nrelative_to = "norm"',
        "target.relative_to",
        "has no meaning for states",
    ),
    ('[target.observables]\nedge = "Z_0"', "", "target.observables", "missing; add [target.observables]"),
    (
        '[target.observables]\nedge = "Z_0"',
        "observables = 3",
        "target.observables",
        "not a section but a whole number",
    ),
    ('edge = "Z_0"', "edge = 3", "target.observables.edge", "not a text but a whole number (3);"),
    ('edge = "Z_0"', 'edge = " "', "target.observables.edge", "empty; write edge ="),
    ('edge = "Z_0"', 'edge = "Z_7"', "target.observables.edge", "refused at line 1, column 1"),
    ('edge = "Z_0"', 'edge = "Z_0 +"', "target.observables.edge", "refused at line 1, column"),
    (SYSTEM, "", "system", "needs exactly one of terms, file, fcidump or model (none given);"),
    (
        SYSTEM,
        SYSTEM + '\nmodel = "ising"',
        "system",
        "needs exactly one of terms, file, fcidump or model (terms and model given)",
    ),
    (SYSTEM, "terms = 3", "system.terms", "not a text but a whole number (3);"),
    (SYSTEM, 'terms = "X_0 Y_0"', "system.terms", "refused at line 1, column 1"),
    (SYSTEM, SYSTEM + "\nqubits = 1", "system.terms", "refused at line 1"),
    (SYSTEM, SYSTEM + "\nqubits = 0", "system.qubits", "below 1 (0);"),
    (SYSTEM, SYSTEM + "\nqubits = 2.0", "system.qubits", "not a whole number but a number (2.0);"),
    (SYSTEM, SYSTEM + "\nsites = 2", "system.sites", "goes with a model only; take it out"),
    (
        SYSTEM,
        'file = "gone.terms"',
        "system.file",
        "no such file ('gone.terms'); the path is taken from the job file's",
    ),
    (SYSTEM, 'file = "."', "system.file", "is a folder ('.');"),
    (SYSTEM, 'model = "isng"', "system.model", "unknown ('isng'); did you mean ising?"),
    (SYSTEM, 'model = "ising"', "system.lattice", "needs exactly one of lattice or bonds;"),
    (SYSTEM, ISING.replace("chain", "chian"), "system.lattice", "unknown ('chian'); did you mean chain?"),
    (SYSTEM, ISING.replace("sites = 2", ""), "system.sites", "missing; add sites = 6"),
    (SYSTEM, ISING.replace("sites = 2", "sites = 0"), "system.sites", "below 1 (0);"),
    (SYSTEM, ISING.replace("sites = 2", "sites = 900"), "system.sites", "900"),
    (
        SYSTEM,
        ISING.replace("zz = 1", ""),
        "system.zz",
        "missing; add zz = 1.0, or a list with one number a bond",
    ),
    (SYSTEM, ISING.replace("zz = 1", "zz = [1, 2]"), "system.zz", "wrong shape"),
    (
        SYSTEM,
        ISING.replace("zz = 1", 'zz = [1, "a"]'),
        "system.zz",
        "entry 1 is not a number but a text ('a');",
    ),
    (
        SYSTEM,
        ISING.replace("zz = 1", "zz = { legs = 1, rungs = 2 }"),
        "system.zz",
        "fits only the bonds of a ladder;",
    ),
    (
        SYSTEM,
        ISING + "\nxx = 1",
        "system.xx",
        "not used by the model ising on the lattice chain; take it out",
    ),
    (
        SYSTEM,
        ISING + "\nrungs = 3",
        "system.rungs",
        "not used by the model ising on the lattice chain; take it out",
    ),
    (SYSTEM, ISING + "\nqubits = 2", "system.qubits", "not used with a model"),
    (SYSTEM, ISING + "\nfield = 1", "system.field", "unknown key; known: model, extra, lattice"),
    (SYSTEM, ISING + '\nextra = "X_9"', "system.extra", "refused at line 1"),
    (
        SYSTEM,
        ISING.replace('lattice = "chain"\nsites = 2', "bonds = 3"),
        "system.bonds",
        "not a list of pairs (3);",
    ),
    (
        SYSTEM,
        ISING.replace('lattice = "chain"\nsites = 2', "bonds = [[0, 1], [1]]"),
        "system.bonds",
        "entry 1 is not a pair",
    ),
    (SYSTEM, ISING.replace('lattice = "chain"\nsites = 2', "bonds = [[0, 0]]"), "system.bonds", "0"),
    ('product = "0+"', "", "start", "needs exactly one of product, pattern or file (none given);"),
    ('product = "0+"', 'product = "0+"\npattern = "0"', "start", "(product and pattern given);"),
    ('product = "0+"', 'prodct = "0+"', "start.prodct", "unknown key; did you mean product?"),
    ('product = "0+"', 'product = "0+1"', "start.product", "describes 3 qubits, but the system has 2;"),
    ('product = "0+"', 'product = "0x"', "start.product", "entry 1 is no state of a qubit ('x');"),
    ('product = "0+"', 'product = ["0", "+j"]', "start.product", "entry 1 is no state of a qubit ('+j');"),
    ('product = "0+"', 'product = ["0", [1.0, nan]]', "start.product", "entry 1 is not finite (nan);"),
    ('product = "0+"', "product = 3", "start.product", "not a text or list but a whole number (3);"),
    ('product = "0+"', 'pattern = ""', "start.pattern", "empty;"),
    ('product = "0+"', 'pattern = "010"', "start.pattern", "longer than the 2 qubits of the system (3);"),
    ('product = "0+"', 'file = "gone.npy"', "start.file", "no such file ('gone.npy');"),
    ('formula = "strang"', "", "candidate[1].formula", 'missing; add formula = "strang"'),
    (
        'formula = "strang"',
        'formula = "strnag"',
        "candidate[1].formula",
        "unknown ('strnag'); did you mean strang?",
    ),
    ('formula = "strang"', "formula = 2", "candidate[1].formula", "not a text but a whole number (2);"),
    ("steps = 4", "steps = 0", "candidate[1].steps", "below 1 (0);"),
    ("steps = 4", "steps = 4.0", "candidate[1].steps", "not a whole number but a number (4.0);"),
    ("steps = 4", 'steps = "lest"', "candidate[1].steps", "neither a number nor least ('lest');"),
    ("steps = 4", 'rule = "comuting"', "candidate[1].rule", "unknown ('comuting'); did you mean commuting?"),
    ("steps = 4", "stepps = 4", "candidate[1].stepps", "unknown key; did you mean steps?"),
    ("[[candidate]]", "[candidate]", "candidate", "not a list of sections; write [[candidate]]"),
    ("[start]", "[run]\nthreads = 0\n[start]", "run.threads", "below 1 (0);"),
    ("[start]", "[run]\nthread = 1\n[start]", "run.thread", "unknown key; did you mean threads?"),
    ("[start]", "[run]\ntitle = 1\n[start]", "run.title", "not a text but a whole number (1);"),
    ("[start]", "[reference]\ntolerance = 0\n[start]", "reference.tolerance", "not above zero (0.0);"),
    (
        "[start]",
        '[reference]\nmethod = "magic"\n[start]',
        "reference.method",
        "unknown ('magic'); known: chebyshev, krylov, dense",
    ),
    ("[start]", '[output]\nfolder = ""\n[start]', "output.folder", 'empty; write folder = "trueturn-audit"'),
]


@pytest.mark.parametrize(("old", "new", "key", "message"), BAD, ids=[f"{key}: {text}" for _, _, key, text in BAD])
def test_a_mistake_is_refused_by_key(read, old: str, new: str, key: str, message: str) -> None:
    with pytest.raises(JobError) as caught:
        read((old, new))
    text = str(caught.value)
    assert text.startswith(f"{key}: ") and message in text and "; " in text
    assert caught.value.key == key
    assert caught.value.path.endswith("job.toml")
    assert isinstance(caught.value, ValueError) and isinstance(caught.value, TrueturnError)


def test_an_error_from_below_stays_attached(read) -> None:
    with pytest.raises(JobError) as caught:
        read(('edge = "Z_0"', 'edge = "Z_0 +"'))
    assert isinstance(caught.value.__cause__, TermError)


def test_a_rule_that_does_not_fit_is_refused_before_the_run(read) -> None:
    with pytest.raises(JobError, match=r"candidate\[1\].rule: .*bond.* takes one or two qubits a term"):
        read(
            (SYSTEM, 'terms = "1.0 Z_0 Z_1 Z_2"'),
            ('product = "0+"', 'pattern = "0"'),
            ("steps = 4", 'rule = "bond"'),
        )


@pytest.mark.parametrize(
    ("text", "where"),
    [
        ("[system\n", "line 1, column 8"),
        ("[target]\ntolerance 0.01\n", "line 2, column 11"),
        ("a = 1\na = 2\n", "line 2"),
        ('a = "', "not valid TOML at"),
    ],
)
def test_malformed_toml_names_line_and_column(write, text: str, where: str) -> None:
    with pytest.raises(JobError) as caught:
        read_job(write(text))
    assert "not valid TOML at" in str(caught.value) and where in str(caught.value)


def test_a_file_that_cannot_be_read_is_a_job_error(tmp_path: Path) -> None:
    with pytest.raises(JobError, match=r"job file: no such file .*trueturn init"):
        read_job(tmp_path / "gone.toml")
    with pytest.raises(JobError, match="job file: cannot be read"):
        read_job(tmp_path)
    (tmp_path / "latin.toml").write_bytes(b"title = '\xe9'")
    with pytest.raises(JobError, match="job file: not UTF-8 text"):
        read_job(tmp_path / "latin.toml")
