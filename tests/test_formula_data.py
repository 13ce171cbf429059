"""The data of the formulas: published digits, order conditions, recorded errors, sources, structures."""

from __future__ import annotations

import math
from decimal import Decimal
from fractions import Fraction

import mpmath
import numpy as np
import pytest

import oracle
import trueturn as tt
from circuits import P3, distance, matrix
from test_order import THREE_PARTS, one_step_error
from trueturn import errors, randomised
from trueturn.driven import Driven, Ramp
from trueturn.driven.circuits import Clock
from trueturn.formulas import FAMILIES, formula_entry
from trueturn.formulas.leading import exponentials_per_step
from trueturn.formulas.order import measured_order
from trueturn.formulas.search_target import Instance
from trueturn.formulas.structure import NEAR_INTEGRABLE, NYSTROM

UNIT = 2.0**-53
PUBLISHED_IDS = {
    "lie": "lie_trotter",
    "strang": "strang",
    "suzuki-4": "suzuki_o4",
    "suzuki-6": "suzuki_o6",
    "suzuki-8": "suzuki_o8",
    "triple-jump-4": "triple_jump_o4",
    "triple-jump-6": "triple_jump_o6",
    "triple-jump-8": "triple_jump_o8",
    "yoshida-6": "yoshida1990_o6_a",
    "yoshida-8": "yoshida1990_o8_d",
    "kahan-li-6": "kahan_li_o6_s9a",
    "kahan-li-8": "kahan_li_o8_s17a",
    "suzuki-umeno-8": "suzuki_umeno_o8_s15",
    "sofroniou-spaletta-10": "sofroniou_spaletta_o10_s35",
    "ruth-3": "ruth_o3",
    "omelyan-2": "omelyan_o2",
    "omelyan-4-s4": "pefrl_o4",
    "omelyan-4-s5": "omf_o4_s5v",
    "mclachlan-4": "mclachlan_s5_o4",
    "blanes-moan-4": "blanes_moan_s6_o4",
    "blanes-moan-6": "blanes_moan_s10_o6",
}
"""Sources as in each formula's `source` and in ``published/formulas.toml``, with whether they were read."""
EVERY = tt.formulas(special=True)
SPECIAL = [entry for name in EVERY if (entry := formula_entry(name)).requires]
HEAVY = ("suzuki-8", "kahan-li-10-s31", "kahan-li-10-s33", "sofroniou-spaletta-10")
MARKED = [pytest.param(name, marks=pytest.mark.heavy) if name in HEAVY else name for name in EVERY]


@pytest.fixture
def scheme(published):
    table = {entry["id"]: entry for entry in published("formulas.toml")["formula"]}
    return lambda name: table[PUBLISHED_IDS[name]]


# Published values


def test_every_published_set_is_registered(published):
    assert sorted(PUBLISHED_IDS.values()) == sorted(entry["id"] for entry in published("formulas.toml")["formula"])
    assert set(PUBLISHED_IDS) <= set(tt.formulas())


@pytest.mark.parametrize("name", PUBLISHED_IDS)
def test_weights_are_the_published_digits_correctly_rounded(name, scheme):
    formula, entry = tt.formula(name), scheme(name)
    assert (formula.order, formula.symmetric) == (entry["order"], entry["symmetric"])
    if "sweeps" not in entry:  # Suzuki's order 8 is recorded by its recursion only
        assert len(formula.stages) == entry["sweep_count"]
        return
    digits = [Decimal(text) for text in entry["sweeps"] if abs(Decimal(text)) > Decimal("1e-40")]
    assert [stage.weight for stage in formula.stages] == [float(weight) for weight in digits]


@pytest.mark.parametrize("name", PUBLISHED_IDS)
def test_the_data_hold_all_published_digits(name, scheme):
    entry, data = scheme(name), formula_entry(name)
    if "gamma" in entry:
        kept = [Fraction(weight) for weight in data.weights]
        recorded = [Fraction(text) for text in entry["gamma"]]
    elif "a" in entry:
        kept = [Fraction(value) for value in (*data.a, *data.b)]
        recorded = [Fraction(text) for text in (*entry["a"], *entry["b"]) if Fraction(text)]
    else:
        return  # Lie is a single 1, Suzuki's order 8 a recursion
    assert len(kept) == len(recorded)
    # the record is rounded to 40 significant digits where it is a closed form, of numbers below 3
    assert max(abs(ours - theirs) for ours, theirs in zip(kept, recorded, strict=True)) <= Fraction(2, 10**39)


@pytest.mark.parametrize("steps", [4, 8])
@pytest.mark.parametrize("name", PUBLISHED_IDS)
def test_errors_on_problem_p3_are_the_recorded_ones(name, steps, scheme):
    expected = float(scheme(name)[f"p3_error_r{steps}"])
    circuit = tt.formula(name).rotations(P3, 1.0, steps)
    exact = oracle.evolution(P3.operator(), 1.0)
    # 7 digits are recorded; each of N rotations is an 8 x 8 product, about 8 u; 1e-13 as the data's note says
    floor = max(1e-13, 8 * circuit.count * UNIT)
    assert abs(distance(matrix(circuit), exact) - expected) <= 1e-6 * expected + floor


def recorded_interval(entry, steps):
    """The recorded error of P3, give or take half a unit of its last digit and the floor that the record names."""
    value = Decimal(entry[f"p3_error_r{steps}"])
    slack = 0.5 * 10.0 ** value.as_tuple().exponent + 1e-13
    return float(value) - slack, float(value) + slack


@pytest.mark.parametrize("steps", [4, 8])
@pytest.mark.parametrize("order", [2, 4, 6, 8])
def test_ratios_at_equal_cost_on_p3_are_the_recorded_ones(order, steps, scheme):
    """Error times exponentials**order, for every two formulas of one order.

    Cost in the record: alternating sweeps over three parts share a part at each turn, so each adds two exponentials.
    """
    names = [name for name in PUBLISHED_IDS if scheme(name)["order"] == order]
    # at 1e-12 the floor takes a tenth of the error, which is too much to rank by
    names = [name for name in names if float(scheme(name)[f"p3_error_r{steps}"]) > 1e-12]
    exact = oracle.evolution(P3.operator(), 1.0)
    ours, low, high = {}, {}, {}
    for name in names:
        per_step = exponentials_per_step(tt.formula(name).exact_stages())
        circuit = tt.formula(name).rotations(P3, 1.0, steps)
        ours[name] = distance(matrix(circuit), exact) * (steps * per_step) ** order
        low[name], high[name] = (
            end * (steps * 2 * scheme(name)["sweep_count"]) ** order for end in recorded_interval(scheme(name), steps)
        )
    assert len(names) >= {2: 2, 4: 6, 6: 5, 8: 2}[order]
    for one in names:
        for other in names:
            assert low[one] / high[other] <= ours[one] / ours[other] <= high[one] / low[other]


# Order conditions, from scratch: words in two letters


BITS = 220
ONE = 1 << BITS


def product_of_exponentials(exponents, degree):
    """Coefficients times 2**220 of exp(c_1 X_1) exp(c_2 X_2) …, letters X_k of 0 and 1, words by length.

    A word of length n stands at the index whose n bits are its letters. Multiplying by exp(cX) appends k
    letters X with c**k / k!.
    """
    series = [np.array([ONE if n == 0 else 0] * 2**n, dtype=object) for n in range(degree + 1)]
    for exponent, letter in exponents:
        powers = [ONE]
        for k in range(1, degree + 1):
            powers.append(powers[-1] * exponent.numerator // (exponent.denominator * k))
        for n in range(degree, 0, -1):
            for k in range(1, n + 1):
                places = (np.arange(2 ** (n - k)) << k) + (2**k - 1 if letter else 0)
                series[n][places] += series[n - k] * powers[k] >> BITS
    return series


def exponents_of(stages):
    return [(weight, letter) for weight, way in stages for letter in ((0, 1) if way == "forward" else (1, 0))]


def half_unit(number):
    """Half a unit of the last digit of a weight in print; none for short decimals and for quotients."""
    text = number if isinstance(number, str) else None
    if isinstance(number, Fraction):
        places = next((k for k in range(60) if 10**k % number.denominator == 0), 60)
    else:
        places = -Decimal(text if text is not None else number).as_tuple().exponent
    return Fraction(1, 2 * 10**places) if places > 4 else Fraction(0)


@pytest.mark.parametrize("name", MARKED)
def test_order_conditions_hold_to_the_printed_digits_and_not_beyond_the_order(name):
    data = formula_entry(name)
    exponents = exponents_of(data.exact_stages())
    found = product_of_exponentials(exponents, data.order + 1)
    size = float(sum(abs(exponent) for exponent, _ in exponents))
    # A weight enters at most four exponents (two stages, or both neighbours), and once more through the entry
    # that completes a sum; a coefficient of n letters moves by at most that times size**(n-1) / (n-1)!.
    shift = 8 * float(sum(map(half_unit, (*data.weights, *data.a, *data.b))))
    for n in range(1, data.order + 1):
        missing = max(abs(coefficient - ONE // math.factorial(n)) for coefficient in found[n]) / ONE
        assert missing <= shift * size ** (n - 1) / math.factorial(n - 1) + 1e-50 * (1 + size**n)
    beyond = max(abs(coefficient - ONE // math.factorial(data.order + 1)) for coefficient in found[-1]) / ONE
    assert beyond > 1e3 * (shift + 1e-50) * size**data.order / math.factorial(data.order)


@pytest.mark.parametrize("name", [name for name in MARKED if name != "lie"])
def test_every_registered_order_is_exact_and_not_just_reached(name):
    formula = tt.formula(name)
    assert measured_order(formula.exact_stages(), formula.order + 1)[0] == formula.order


@pytest.mark.parametrize("order", [10, pytest.param(12, marks=pytest.mark.heavy)])
def test_suzukis_family_is_made_on_demand(order):
    formula = tt.formula(f"suzuki-{order}")
    assert (formula.name, formula.order, formula.symmetric) == (f"suzuki-{order}", order, True)
    assert len(formula.stages) == 2 * 5 ** (order // 2 - 1)  # M. Suzuki (1991), recursion, from memory
    assert tt.formula(f"suzuki-{order}") is formula
    assert formula.name not in tt.formulas()


def test_names_are_given_once_and_in_our_style():
    names = [entry.name for family in FAMILIES for entry in family.ENTRIES]
    assert len(set(names)) == len(names)
    for name in names:
        assert name == name.lower() and "_" not in name and " " not in name
        orders = {formula_entry(name).order, formula_entry(name).special_order} - {None}
        assert name in ("lie", "strang") or any(
            str(order) in name.split("-") or f"{order}b" in name for order in orders
        )


def source_is_sound(source, status=None):
    """A year; and "from memory" just where the record (if there is one) says that it was not read."""
    dated = any(str(year) in source for year in range(1950, 2027))
    return dated and status in (None, "memory" if "from memory" in source else "read")


@pytest.mark.parametrize("name", EVERY)
def test_every_formula_names_a_source_and_tells_whether_it_was_read(name, published):
    status = {entry["id"]: entry["status"] for entry in published("formulas.toml")["formula"]}
    assert tt.formula(name).name == name
    assert source_is_sound(tt.formula(name).source, status[PUBLISHED_IDS[name]] if name in PUBLISHED_IDS else None)


def test_a_source_that_was_read_is_sound_and_a_wrong_claim_is_not():
    read, recalled = "A. Author, J. Phys. 1, 2 (1999), Table 3", "A. Author, J. Phys. 1, 2 (1999); from memory"
    assert source_is_sound(read) and source_is_sound(read, "read") and not source_is_sound(read, "memory")
    assert source_is_sound(recalled, "memory") and not source_is_sound(recalled, "read")
    assert not source_is_sound("my notebook; from memory")


# Structures


def test_special_sets_are_not_among_the_general_ones():
    special = set(tt.formulas(special=True)) - set(tt.formulas())
    listed = [entry for family in FAMILIES for entry in family.ENTRIES if entry.requires]
    assert special == {entry.name for entry in listed}
    assert all(entry.special_order > entry.order for entry in listed)
    assert {entry.requires for entry in listed} == {NYSTROM, NEAR_INTEGRABLE}  # each structure has its test below
    assert not any(tt.formula(name).requires or tt.formula(name).special_order for name in tt.formulas())


@pytest.mark.parametrize(("name", "requires"), [(entry.name, entry.requires) for entry in SPECIAL])
def test_special_sets_are_refused_for_general_partitions(name, requires):
    two = tt.Partition([tt.Operator("X_0 X_1"), tt.Operator("Z_0 + 0.5 Z_1")])
    for partition, parts in ((P3, "3 parts"), (two, "2 parts")):
        with pytest.raises(errors.FormulaError) as caught:
            tt.formula(name).rotations(partition, 1.0, 2)
        assert str(caught.value).startswith(f"partition: lacks what {name} requires ({requires}; here {parts})")
        assert f"the order is only {tt.formula(name).order}" in str(caught.value)
        assert caught.value.name == name


def test_special_sets_serve_partitions_with_their_structure():
    commuting = tt.Partition([tt.Operator("X_0 X_1"), tt.Operator("Z_0 Z_1")])
    circuit = tt.formula("blanes-moan-nystrom-6").rotations(commuting, 1.0, 1)
    # 23 exponentials of 4 x 4 matrices, about 4 u each, and angles off by a few u
    assert distance(matrix(circuit), oracle.evolution(commuting.operator(), 1.0)) <= 23 * 16 * UNIT
    perturbed = tt.Partition([tt.Operator("X_0 X_1"), tt.Operator("0.1 Z_0", qubits=2)])
    assert tt.formula("laskar-robutel-2").rotations(perturbed, 1.0, 4).count == 4 * 4 + 1


def test_special_sets_are_refused_where_no_fixed_parts_keep_their_structure():
    formula = tt.formula("laskar-robutel-2")
    small = tt.Partition([tt.Operator("X_0 X_1"), tt.Operator("0.1 Z_0", qubits=2)])
    large, tail = tt.Partition([small.parts[0]]), small.parts[1]
    ramp = Driven([(Ramp(0.0, rate=1.0), small.parts[0]), (0.1, small.parts[1])])
    for refused, where in (
        (lambda: ramp.rotations(formula, "terms", 1.0, 2), "strengths that change with time do not keep that"),
        (lambda: Clock(formula, 2), "strengths that change with time do not keep that"),
        (lambda: randomised.permuted(formula, small, 1.0, 2, 0), "parts whose order is drawn do not keep that"),
        (lambda: randomised.directed(formula, small, 1.0, 2, 0), "parts whose order is drawn do not keep that"),
        (lambda: randomised.partly(formula, large, tail, 1.0, 2, 1, 0), "a part that is drawn term by term does not"),
    ):
        with pytest.raises(errors.FormulaError) as caught:
            refused()
        assert str(caught.value).startswith(f"formula: laskar-robutel-2 requires {NEAR_INTEGRABLE}, and {where}")
        assert str(caught.value).endswith("; choose a formula that requires nothing")
    with pytest.raises(errors.FormulaError, match=r"^partition: lacks what laskar-robutel-2 requires"):
        Instance(P3, 1.0, 1).error(formula)


def test_special_sets_run_where_the_strengths_stand_still():
    constant = Driven([(1.0, tt.Operator("X_0 X_1")), (0.1, tt.Operator("Z_0", qubits=2))])
    assert constant.rotations(tt.formula("laskar-robutel-2"), "terms", 1.0, 4).count == 4 * 4 + 1


def slope(error, coarse):
    return math.log2(error(coarse) / error(coarse / 2)) - 1


def test_a_nystrom_set_has_its_special_order_in_mechanics():
    """The field the set was made for: two particles in a potential, where [A, [A, [A, B]]] = 0.

    M. Hénon and C. Heiles, "The applicability of the third integral of motion", Astron. J. 69, 73 (1964), with
    one quartic term added; from memory.
    """
    data = formula_entry("blanes-moan-nystrom-6")
    assert (data.order, data.special_order) == (4, 6)

    def force(x, y):
        return -x - 2 * x * y + mpmath.mpf("0.3") * x**3, -y - x * x + y * y

    start = [mpmath.mpf(text) for text in ("0.3", "-0.2", "0.4", "0.25")]

    def step(duration):
        x, y, u, v = start
        for kick, drift in zip(data.a, [*data.b, Fraction(0)], strict=True):
            scale = duration * mpmath.mpf(kick.numerator) / kick.denominator
            along_x, along_y = force(x, y)
            u, v = u + scale * along_x, v + scale * along_y
            scale = duration * mpmath.mpf(drift.numerator) / drift.denominator
            x, y = x + scale * u, y + scale * v
        return x, y, u, v

    with mpmath.workdps(30):
        flow = mpmath.odefun(lambda _, s: [s[2], s[3], *force(s[0], s[1])], 0, start)

        def error(duration):
            pairs = zip(step(duration), flow(duration), strict=True)
            return float(mpmath.sqrt(sum((one - other) ** 2 for one, other in pairs)))

        # the slope settles from above, 6.15 an octave earlier; 15 digits leave a floor of 1e-16 under 2e-13
        assert abs(slope(error, mpmath.mpf("0.25")) - 6) < 0.15


@pytest.mark.parametrize(("smallness", "order"), [(1.0, 2), (1e-9, 4)])
def test_a_near_integrable_set_has_its_special_order_for_small_perturbations_only(smallness, order):
    # J. Laskar and P. Robutel (2001), from memory: the error of a step is ε τ⁵ + ε² τ³.
    large, small = THREE_PARTS[0], [(smallness * c, letters) for c, letters in THREE_PARTS[1]]
    stages = formula_entry("laskar-robutel-2").exact_stages()
    found = slope(lambda step: one_step_error(stages, (large, small), step), 0.1)
    assert abs(found - order) < 0.15
    assert tt.formula("laskar-robutel-2").special_order == 4
