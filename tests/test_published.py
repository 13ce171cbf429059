"""Certified references give the published and closed-form answers of ``published/exact.json``.

Each value must lie within the bound that the reference states for it plus the tolerance printed beside the
value, which covers the rounding of the printed number itself.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest

import free_fermions
import oracle
from trueturn import Operator
from trueturn.reference import reference
from trueturn.state import State

UNIT_ROUNDOFF = 2.0**-53


def operator_of(terms, qubits):
    return Operator.gather(terms, qubits=qubits)


def start_of(case):
    if case["initial"]["kind"] == "plus":
        return State.product("+" * case["n"])
    return State.computational(sum(1 << qubit for qubit in case["initial"]["ones"]), case["n"])


def assert_cases_hold(cases):
    """Check all cases of one Hamiltonian and start, which one reference can serve."""
    times = sorted({case["time"] for case in cases})
    observables = {case["id"]: operator_of(case["observable"], case["n"]) for case in cases}
    found = reference(operator_of(cases[0]["terms"], cases[0]["n"]), start_of(cases[0]), times, 1e-11, observables)
    for case in cases:
        at = times.index(case["time"])
        value, bound = found.expectations[case["id"]][at], found.expectation_bounds[case["id"]][at]
        assert bound <= 1e-9
        assert abs(value - case["expected"]) <= bound + case["tol"], case["id"]


def assert_topic_holds(published, topic, qubits, count):
    cases = [case for case in published("exact.json")["cases"] if case["topic"] == topic and case["n"] in qubits]
    assert len(cases) == count

    def evolution(case):
        return repr((case["n"], case["terms"], case["initial"]))

    for _, group in itertools.groupby(sorted(cases, key=evolution), key=evolution):
        assert_cases_hold(list(group))


def test_one_spin_in_a_tilted_field_precesses(published):
    """I. I. Rabi, Space quantization in a gyrating magnetic field, Phys. Rev. 51, 652 (1937); formula from
    memory."""
    assert_topic_holds(published, "rabi", [1], 9)


@pytest.mark.parametrize(("amplitude", "tilt", "time"), [(0.6, 0.8, 1.0), (0.35, -1.2, 37.0), (-2.0, 0.1, 80.0)])
def test_one_spin_follows_the_closed_form_of_rabi(amplitude, tilt, time):
    """I. I. Rabi, Phys. Rev. 51, 652 (1937), from memory: <Z> = 1 - 2 (a/w)² sin² wt, <Y> = -(a/w) sin
    2wt."""
    w = np.hypot(amplitude, tilt)
    spin = operator_of([(amplitude, "X_0"), (tilt, "Z_0")], 1)
    watched = {letter: Operator(f"{letter}_0") for letter in "XYZ"}
    found = reference(spin, State.product("0"), time, 1e-11, watched)
    sine = np.sin(w * time)
    expected = {
        "X": 2 * amplitude * tilt / w**2 * sine**2,
        "Y": -amplitude / w * np.sin(2 * w * time),
        "Z": 1 - 2 * (amplitude / w * sine) ** 2,
    }
    for letter, value in expected.items():
        # The closed form in doubles: w, w t and the ratios are off by a few u, so the phase 2 w t by 8 u of
        # itself.
        closed_form_rounding = UNIT_ROUNDOFF * (16 + 8 * w * time)
        gap = abs(found.expectations[letter][0] - value)
        assert gap <= found.expectation_bounds[letter][0] + closed_form_rounding


@pytest.mark.parametrize("qubits", [8, 12, 16])
def test_quenched_ising_chains_follow_free_fermions(published, qubits):
    """E. Lieb, T. Schultz, D. Mattis, Two soluble models of an antiferromagnetic chain, Ann. Phys. 16, 407
    (1961); P. Pfeuty, The one-dimensional Ising model with a transverse field, Ann. Phys. 57, 79 (1970); E.
    Barouch, B. M. McCoy, M. Dresden, Statistical mechanics of the XY model. I, Phys. Rev. A 2, 1075 (1970);
    method from memory."""
    assert_topic_holds(published, "tfim", [qubits], 48)


@pytest.mark.heavy
def test_quenched_ising_chains_of_twenty_sites_follow_free_fermions(published):
    """Sources as for the shorter chains."""
    assert_topic_holds(published, "tfim", [20], 48)


def test_the_free_fermion_oracle_gives_the_published_values(published):
    """The test module's own formulas, against the file; sources in `free_fermions`."""
    checked = 0
    for case in published("exact.json")["cases"]:
        if case["topic"] != "tfim":
            continue
        _, boundary, _, field, _, quantity = case["id"].split("-")
        field, qubits, time = float(field[1:]), case["n"], case["time"]
        if boundary == "periodic":
            value = free_fermions.periodic_chain(qubits, field, time)
        else:
            sites, bonds = free_fermions.open_chain(qubits, field, time)
            value = {"X": sites.mean(), "X0": sites[0], "ZZ": bonds.mean()}[quantity]
        # Sums of 2n products of numbers below 1, twice: some (2n)² u = 2e-13 at n = 20.
        assert abs(value - case["expected"]) <= 1e-12, case["id"]
        checked += 1
    assert checked == 192


@pytest.mark.parametrize("field", [0.5, 1.5])
def test_a_long_quench_of_sixteen_sites_stays_inside_its_certificate(field):
    """Free fermions up to t = 20, about 900 applications of H; sources in `free_fermions`, formulas from
    memory."""
    n, times = 16, [5.0, 12.5, 20.0]
    bonds, sites = [f"Z_{j} Z_{j + 1}" for j in range(n - 1)], [f"X_{j}" for j in range(n)]
    chain = operator_of([(-1.0, bond) for bond in bonds] + [(-field, site) for site in sites], n)
    watched = {name: operator_of([(1.0, name)], n) for name in (sites[0], sites[7], bonds[0], bonds[7])}
    watched["energy"] = chain
    found = reference(chain, State.product("+" * n), times, 1e-10, watched)
    assert found.certificate.proven
    assert found.certificate.largest <= 1e-10
    for at, time in enumerate(times):
        on_sites, on_bonds = free_fermions.open_chain(n, field, time)
        exact = {sites[0]: on_sites[0], sites[7]: on_sites[7], bonds[0]: on_bonds[0], bonds[7]: on_bonds[7]}
        exact["energy"] = -n * field
        for name, value in exact.items():
            # The oracle's own rounding: (2n)² u for its products, and an angle of up to 2 ‖M‖ t = 100 off by
            # u each.
            rounding = UNIT_ROUNDOFF * (32**2 + 100 * 32) * (n if name == "energy" else 1)
            assert abs(found.expectations[name][at] - value) <= found.expectation_bounds[name][at] + rounding


def test_commuting_ising_models_dephase_as_in_closed_form(published):
    """G. G. Emch, Non-Markovian model for the approach to equilibrium, J. Math. Phys. 7, 1198 (1966); C.
    Radin, Approach to equilibrium in a simple model, J. Math. Phys. 11, 2945 (1970); formulas from memory.
    Also the cluster state of H. J. Briegel, R. Raussendorf, Phys. Rev. Lett. 86, 910 (2001) and the GHZ state
    of K. Mølmer, A. Sørensen, Phys. Rev. Lett. 82, 1835 (1999)."""
    assert_topic_holds(published, "ising-dephasing", [6, 8, 10], 23)


@pytest.mark.heavy
def test_commuting_ising_models_of_twenty_sites_dephase_as_in_closed_form(published):
    """Sources as for the smaller models; the file's models of 24 and 28 sites need gibibytes and stay out."""
    assert_topic_holds(published, "ising-dephasing", [20], 10)


def test_exchange_swaps_spins_partially(published):
    """D. Loss, D. P. DiVincenzo, Quantum computation with quantum dots, Phys. Rev. A 57, 120 (1998), from
    memory; clusters of three and four by addition of angular momenta."""
    assert_topic_holds(published, "heisenberg", [2, 3, 4], 11)


def test_exchange_for_a_quarter_period_is_swap_and_half_of_it_a_root_of_swap(published):
    """D. Loss, D. P. DiVincenzo, Phys. Rev. A 57, 120 (1998), from memory; with the global phase."""
    for case in published("exact.json")["unitaries"]:
        expected = np.array(case["unitary"]) @ [1, 1j]
        operator = operator_of(case["terms"], case["n"])
        for index in range(2 ** case["n"]):
            found = reference(operator, State.computational(index, case["n"]), case["time"], 1e-12)
            gap = np.linalg.norm(found.states[0].amplitudes - expected[:, index])
            assert gap <= found.certificate.largest + case["tol"], case["id"]


def test_spectra_of_heisenberg_clusters_have_the_published_levels(published):
    """Addition of angular momenta; levels with their degeneracies."""
    spectra = published("exact.json")["spectra"]
    assert len(spectra) == 5
    for case in spectra:
        operator = operator_of(case["terms"], case["n"])
        levels = sorted(level for level, times in case["levels"] for _ in range(times))
        # Eigenvalues of a dense matrix: backward error below 10 N u ‖H‖, on top of the printed digits.
        rounding = 10 * 2 ** case["n"] * UNIT_ROUNDOFF * operator.one_norm()
        assert np.abs(np.linalg.eigvalsh(operator.dense()) - levels).max() <= case["tol"] + rounding
        low, high = operator.spectral_interval()
        assert low <= levels[0] + case["tol"]
        assert high >= levels[-1] - case["tol"]


# Half a unit of the tenth digit, in which spectrum and terms of the file are printed.
PRINTED = 0.5e-10


def test_hydrogen_in_a_minimal_basis_has_the_published_spectrum(published):
    """J. D. Whitfield, J. Biamonte, A. Aspuru-Guzik, Simulation of electronic structure Hamiltonians using
    quantum computers, Mol. Phys. 109, 735 (2011), six-digit integrals from memory, as verified in the
    published notes."""
    molecule = published("exact.json")["h2"]
    operator = operator_of(molecule["pauli_terms"], 4)
    assert len(operator) == molecule["n_terms"] == 15
    levels = np.linalg.eigvalsh(operator.dense())
    # The identity term, the only one cut to ten digits, shifts all levels alike.
    rounding = 10 * 16 * UNIT_ROUNDOFF * operator.one_norm()
    assert np.abs(levels - molecule["spectrum"]).max() <= 2 * PRINTED + rounding
    assert abs(levels[0] - molecule["ground_energy"]) <= 2 * PRINTED + rounding
    filled = State.computational(sum(1 << qubit for qubit in molecule["hartree_fock_state_ones"]), 4)
    assert abs(filled.expectation(operator) - molecule["hartree_fock_energy"]) <= 2 * PRINTED + rounding


def test_hydrogen_moves_between_its_closed_shells_at_the_published_rate(published):
    """Dynamics of the four-qubit molecule (integrals as above) and of the reduced two-qubit one (P. J. J.
    O'Malley et al., Scalable quantum simulation of molecular energies, Phys. Rev. X 6, 031007 (2016), table,
    row R = 0.75; from memory)."""
    assert_topic_holds(published, "h2", [2, 4], 4)


def test_reduced_hydrogen_has_the_ground_energy_of_its_table_rows(published):
    """P. J. J. O'Malley et al., Phys. Rev. X 6, 031007 (2016), table of coefficients against distance; from
    memory."""
    rows = published("exact.json")["h2_reduced_sto6g"]["rows"]
    assert len(rows) == 6
    for row in rows:
        operator = operator_of(row["terms"], 2)
        rounding = 10 * 4 * UNIT_ROUNDOFF * operator.one_norm()
        ground = np.linalg.eigvalsh(operator.dense())[0]
        assert abs(ground - row["ground_of_rounded_table"]) <= rounding
        # Coefficients rounded to four digits: half a unit each moves a level by at most the sum over the
        # terms.
        assert abs(ground - row["ground_sto6g_unrounded"]) <= 0.5e-4 * len(operator)


def test_ground_states_do_nothing_but_turn_their_phase(published):
    """Follows from the spectra above: exp(-iHt) of an eigenstate is exp(-iEt) of it."""
    molecule = published("exact.json")["h2"]
    operator = operator_of(molecule["pauli_terms"], 4)
    levels, vectors = np.linalg.eigh(oracle.dense(operator))
    time = 25.0
    found = reference(operator, State.from_array(np.ascontiguousarray(vectors[:, 0])), time, 1e-11)
    expected = np.exp(-1j * levels[0] * time) * vectors[:, 0]
    # Backward error of the eigenpair: 10 N u ‖H‖, which acts for the whole time.
    rounding = 10 * 16 * UNIT_ROUNDOFF * operator.one_norm() * (1 + time)
    gap = np.linalg.norm(found.states[0].amplitudes - expected)
    assert gap <= found.certificate.largest + rounding
