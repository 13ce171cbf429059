"""Costs: the counts of the written file, savings, synthesis, success, tables."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

import qasm_gates
import trueturn as tt
from strategies import circuits, gate_options, pair_circuits
from trueturn import _memory
from trueturn.errors import ArgumentError, MemoryRefusedError, RotationError

MOST = 2**64 - 1


@given(st.one_of(circuits(), pair_circuits()), gate_options)
def test_counts_and_depths_are_those_of_the_file(circuit, device):
    cost = circuit.cost(**device)
    for version in (2, 3):
        text = circuit.qasm(version, **device)
        assert qasm_gates.counts(text) == (cost.two_qubit_gates, cost.swaps, cost.one_qubit_gates)
        assert qasm_gates.depths(text) == (cost.depth, cost.two_qubit_depth)


@given(st.one_of(circuits(), pair_circuits()), gate_options)
def test_savings_save(circuit, device):
    cost = circuit.cost(**device)
    weights = [(int(x) | int(z)).bit_count() for x, z in zip(circuit.x_masks, circuit.z_masks, strict=True)]
    assert cost.unsaved_two_qubit_gates == sum(2 * (weight - 1) for weight in weights if weight)
    assert cost.two_qubit_gates <= cost.unsaved_two_qubit_gates
    assert cost.rotations == sum(map(bool, weights))


@given(st.one_of(circuits(), pair_circuits()), st.sampled_from(["ascending", "z-first"]))
def test_neighbouring_ladders_cancel_as_saved_gates_counts_or_better(circuit, order):
    cost = circuit.cost(order=order, join_pairs=False)
    assert cost.two_qubit_gates <= circuit.two_qubit_gates() - tt.saved_gates(circuit, order)


@pytest.mark.parametrize("weight", range(1, 12))
def test_one_string_takes_a_ladder_down_and_up(weight):
    circuit = tt.Rotations([0b010101010101 % 2**weight], [2**weight - 1], [0.3], 12)
    depth = {"staircase": 2 * (weight - 1), "balanced": 2 * math.ceil(math.log2(weight)), "hub": 2 * (weight - 1)}
    for ladder, layers in depth.items():
        cost = circuit.cost(ladder=ladder)
        # 2(w-1): Nielsen, Chuang (2000), section 4.7.3, from memory.
        assert (cost.two_qubit_gates, cost.two_qubit_depth) == (2 * (weight - 1), layers)
        assert circuit.cost(ladder=ladder, native="zz").two_qubit_gates == max(0, 2 * (weight - 2) + 1)
        assert circuit.cost(ladder=ladder, native="cz").two_qubit_gates == 2 * (weight - 1)


def test_a_bond_takes_two_or_three():
    """Three controlled NOTs do for any two-qubit unitary: Vidal, Dawson, Phys. Rev. A 69, 010301 (2004), abstract."""
    letters = {"X": (1, 0), "Y": (1, 1), "Z": (0, 1)}
    for first in letters:
        for second in letters:
            others = [(a, b) for a in letters for b in letters if a != first and b != second]
            for a, b in others:
                pairs = [(first, second), (a, b)]
                (third,) = set(letters) - {first, a}
                (fourth,) = set(letters) - {second, b}
                pairs.append((third, fourth))
                x = [letters[one][0] | letters[other][0] << 1 for one, other in pairs]
                z = [letters[one][1] | letters[other][1] << 1 for one, other in pairs]
                assert tt.Rotations(x[:2], z[:2], [0.1, 0.2], 2).cost().two_qubit_gates == 2
                assert tt.Rotations(x, z, [0.1, 0.2, 0.3], 2).cost().two_qubit_gates == 3


def test_a_heisenberg_ring_costs_what_the_table_says():
    """One first-order step, n = 10: 6n = 60 two-qubit gates and 4n = 40 rotations alone, 3n = 30 with bonds joined."""
    ring = tt.model.heisenberg(tt.lattice.ring(10), coupling=1.0, z=0.5)
    for rule in ("single", "bond"):
        cost = tt.formula("lie").rotations(tt.Partition.of(ring, rule), 1.0, 1).cost()
        assert (cost.unsaved_two_qubit_gates, cost.rotations, cost.two_qubit_gates) == (60, 40, 30)


def test_strings_of_a_bond_join_across_other_bonds_and_keep_their_order():
    x = [0b0011, 0b1100, 0b0011, 0b1100]
    circuit = tt.Rotations(x, [0, 0, 0b0011, 0b1100], [0.1, 0.2, 0.3, 0.4], 4)  # XX_01 XX_23 YY_01 YY_23
    assert circuit.cost().two_qubit_gates == 4
    found, _ = qasm_gates.rotations(circuit.qasm())
    assert [angle for *_, angle in found] == [0.1, 0.2, 0.3, 0.4]


def test_equal_ends_of_a_repeated_step_meet_once():
    step = tt.Rotations([0b111, 0b010, 0b111], [0, 0b010, 0], [0.1, 0.2, 0.3], 3)  # X_0 X_1 X_2, Y_1, and again
    # The ladder stays open from one step to the next, and closes in each step for Y_1 alone: 2 + 4 r + 2.
    assert step.cost().two_qubit_gates == 8
    for repeat in (2, 5, 10**9):
        cost = step.times(repeat).cost()
        assert (cost.two_qubit_gates, cost.unsaved_two_qubit_gates) == (4 * repeat + 4, 8 * repeat)


def test_repeats_are_multiplied_out_and_stop_at_the_largest_count():
    step = tt.Rotations([0b11, 0b110, 1], [0, 0b110, 1], [0.1, 0.2, 0.3], 3)
    once, thrice = step.times(10**6).cost(), step.times(3 * 10**6).cost()
    assert thrice.depth - once.depth == 2 * (step.times(2 * 10**6).cost().depth - once.depth)
    endless = step.times(2**62).cost()
    assert endless.rotations == 3 * 2**62
    assert endless.two_qubit_gates == endless.depth == MOST
    assert endless.t_count > MOST


def test_synthesis_follows_the_formula_with_shared_errors():
    """3 log2(1/ε): Ross, Selinger, Quantum Inf. Comput. 16, 901 (2016), abstract; leading term, each rounded up."""
    leading = {1e-3: 29.897, 1e-5: 49.829, 1e-10: 99.658, 1e-15: 149.487}
    one = tt.Rotations([1], [0], [0.1], 1)
    for error, value in leading.items():
        assert one.cost(synthesis_error=error).t_count == math.ceil(value)
    assert one.times(50).cost(synthesis_error=1e-4).t_count == 50 * math.ceil(3 * math.log2(50 / 1e-4))
    assert tt.Rotations([], [], [], 1).cost().t_count == 0


def test_clifford_angles_take_no_t_gate_and_odd_eighths_take_one():
    clifford = [k * math.pi / 4 for k in range(-9, 10)] + [math.pi / 2 * 0.1 * 5]
    t_like = [k * math.pi / 8 for k in range(-9, 10, 2)]
    general = [0.1, math.pi / 8 * (1 + 1e-14), 1e9, 1e300, 5e-324]
    angles = clifford + t_like + general
    for native in ("cx", "zz"):
        cost = tt.Rotations([3] * len(angles), [0] * len(angles), angles, 2).times(7).cost(native=native)
        assert (cost.clifford_rotations, cost.t_rotations) == (7 * len(clifford), 7 * len(t_like))
        assert cost.rotations == 7 * len(angles)
        rest = 7 * len(general)
        assert cost.t_count == 7 * len(t_like) + rest * math.ceil(3 * math.log2(rest / 1e-3))


def test_success_multiplies_the_chances_of_every_gate():
    circuit = tt.Rotations([0b11, 0b01], [0, 0], [0.1, 0.2], 2).times(10)
    assert circuit.cost().success is None
    cost = circuit.cost(two_qubit_error=0.01, one_qubit_error=0.001, readout_error=0.02)
    expected = 0.99**cost.two_qubit_gates * 0.999**cost.one_qubit_gates * 0.98**2
    assert cost.success == pytest.approx(expected, rel=1e-13)  # some 50 roundings of 1.1e-16
    assert "independently" in " ".join(cost.assumptions)


def test_the_cheaper_routing_is_taken():
    far = tt.Rotations([0b100001], [0], [0.1], 6)
    stay = far.times(100)
    for circuit in (far, stay):
        made = {routing: circuit.cost(connectivity="line", routing=routing) for routing in ("bridges", "swaps")}
        best = circuit.cost(connectivity="line")
        assert best.two_qubit_gates == min(cost.two_qubit_gates for cost in made.values())
        assert best.two_qubit_gates == made[best.routing].two_qubit_gates
    # d = 5 edges: a bridge takes 2(2d - 1) = 18, swaps 3(d - 1) + 2 = 14.
    assert far.cost(connectivity="line").two_qubit_gates == 14
    assert far.cost(connectivity="line", routing="bridges").two_qubit_gates == 18


def test_a_searched_layout_puts_a_ring_on_a_grid():
    """A ring of six is a cycle of the 2 x 4 grid: no swap, no bridge. By number it is none."""
    ring = tt.model.heisenberg(tt.lattice.ring(6), coupling=1.0)
    circuit = tt.formula("strang").rotations(tt.Partition.of(ring, "bond"), 1.0, 100)
    grid = tt.lattice.square(2, 4)
    searched = circuit.cost(connectivity=grid, layout="search")
    assert searched.two_qubit_gates == circuit.cost().two_qubit_gates
    assert circuit.cost(connectivity=grid).two_qubit_gates > searched.two_qubit_gates
    assert sorted(set(searched.start_layout)) == sorted(searched.start_layout)
    with pytest.raises(ArgumentError, match=r"layout: unknown \('serach'\); did you mean 'search'"):
        circuit.cost(layout="serach")


def test_a_searched_layout_leaves_parts_that_are_cut_off():
    circuit = tt.Rotations([0b111], [0], [0.1], 3)
    broken = [(0, 1), (2, 3), (3, 4)]
    assert set(circuit.cost(connectivity=broken, layout="search").start_layout) == {2, 3, 4}
    with pytest.raises(ArgumentError, match=r"connectivity: disconnected \(no way from qubit 0 to qubit 2\)"):
        circuit.cost(connectivity=broken)
    with pytest.raises(
        ArgumentError, match=r"connectivity: disconnected \(its largest part has 2 qubits, the circuit 3\)"
    ):
        circuit.cost(connectivity=[(0, 1), (2, 3)], layout="search")


@given(st.one_of(circuits(max_count=6), pair_circuits()), st.sampled_from(["line", "grid", "ring"]))
def test_a_searched_layout_never_costs_more(circuit, connectivity):
    searched = circuit.cost(connectivity=connectivity, layout="search")
    assert searched.two_qubit_gates <= circuit.cost(connectivity=connectivity).two_qubit_gates
    text = circuit.qasm(connectivity=connectivity, layout="search")
    assert qasm_gates.counts(text)[0] == searched.two_qubit_gates
    assert f"start_layout = {list(searched.start_layout)}" in text


def test_word_and_lattice_describe_the_same_device():
    circuit = tt.Rotations([0b100000001], [0b10000], [0.1], 9)
    assert circuit.cost(connectivity="grid") == circuit.cost(connectivity=tt.lattice.square(3, 3))
    assert circuit.cost(connectivity="ring") == circuit.cost(connectivity=tt.lattice.ring(9))
    assert circuit.cost(connectivity="line") == circuit.cost(connectivity=tt.lattice.chain(9))
    assert circuit.cost(connectivity="all") == circuit.cost()


def test_repeated_bodies_that_do_not_fit_in_memory_are_refused(monkeypatch):
    monkeypatch.setattr(_memory, "available_bytes", lambda: 10**5)
    body = tt.Rotations([3] * 1000, [0] * 1000, [0.1] * 1000, 2)
    assert body.cost().rotations == 1000
    with pytest.raises(MemoryRefusedError, match=r"circuit: does not fit in memory"):
        body.times(2).cost()


def test_costs_stand_side_by_side():
    ring = tt.model.heisenberg(tt.lattice.ring(6), coupling=1.0)
    partition = tt.Partition.of(ring, "bond")
    found = {name: tt.formula(name).rotations(partition, 1.0, 4) for name in ("lie", "strang")}
    table = tt.compare_costs(found, two_qubit_error=1e-3)
    assert table.rows["strang"] == found["strang"].cost(two_qubit_error=1e-3)
    head, lie, strang, *said = repr(table).splitlines()
    assert head.split()[0] == "two-qubit"
    assert lie.split()[:2] == ["lie", str(table.rows["lie"].two_qubit_gates)]
    assert strang.startswith("strang")
    assert "swaps" in head
    assert [line.split(":")[0] for line in said if ":" in line] == ["T count", "Success"]
    assert table.to_dict()[1]["name"] == "strang"
    with pytest.raises(ArgumentError, match=r"circuits: no mapping of names to Rotations \(list\)"):
        tt.compare_costs([found["lie"]])


def test_a_phase_out_of_range_is_refused():
    circuit = tt.Rotations([0], [0], [1e300], 1).times(10**10)
    with pytest.raises(RotationError, match=r"phase: grows out of range"):
        circuit.cost()
