"""The transportation solver against other solvers, against hand-worked plans, and its own certificate."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import linprog

from earthwork.errors import PlanError
from earthwork.plan import transport
from earthwork.plan.transport import certify, solve_transport
from earthwork.plan.transport_costs import Costs
from earthwork.plan.transport_cut import TransportInfeasible


def matrix_costs(*rows):
    return Costs.of_matrix(np.array(rows, float))


def by_linear_program(supply, need, cost, spare_rows, spare_columns, weight=None):
    """The same problem written out as a dense program for HiGHS."""
    n, m = cost.shape
    i, j = np.nonzero(np.isfinite(cost))
    k = np.arange(len(i))
    rows, columns = np.zeros((n, len(i))), np.zeros((m, len(i)))
    rows[i, k] = 1
    columns[j, k] = 1 if weight is None else weight[i, j]
    equal = np.vstack([rows[~spare_rows], columns[~spare_columns]])
    at_most = np.vstack([rows[spare_rows], columns[spare_columns]])
    return linprog(
        cost[i, j],
        A_ub=at_most if len(at_most) else None,
        b_ub=np.r_[supply[spare_rows], need[spare_columns]] if len(at_most) else None,
        A_eq=equal if len(equal) else None,
        b_eq=np.r_[supply[~spare_rows], need[~spare_columns]] if len(equal) else None,
    )


def random_case(seed):
    rng = np.random.default_rng(seed)
    n, m = rng.integers(1, 8, 2)
    cost = rng.integers(-5, 20, (n, m)).astype(float)
    cost[rng.random((n, m)) < 0.2] = np.inf
    cost[0, 0] = 1.0
    supply, need = rng.integers(0, 10, n).astype(float), rng.integers(0, 10, m).astype(float)
    return supply, need, cost, rng.random(n) < 0.5, rng.random(m) < 0.5


def straight_case(n, seed, size=1000.0):
    rng = np.random.default_rng(seed)
    place = rng.uniform(0, size, (2 * n, 2))
    supply, need = rng.integers(50, 500, n).astype(float), rng.integers(50, 500, n).astype(float)
    need[0] += max(0.0, supply.sum() - need.sum())
    supply[0] += max(0.0, need.sum() - supply.sum())
    return supply, need, place[:n], place[n:]


# --- by hand ------------------------------------------------------------------------------------------------------


def test_one_dimensional_haul_is_the_area_of_the_mass_curve():
    # Cut 100 at 0 and 50 at 10, fill 80 at 5 and 70 at 20: the curve stands at 100, 20, 70 over 5, 5 and 10:
    # 500 + 100 + 700 = 1300 (identity: least haul = ∫|M| dx where cut equals fill).
    costs = Costs.straight(np.array([[0.0, 0], [10, 0]]), np.array([[5.0, 0], [20, 0]]))
    plan = solve_transport(np.array([100.0, 50]), np.array([80.0, 70]), costs)
    assert plan.cost == pytest.approx(1300, rel=1e-12)


def test_prices_say_what_one_more_unit_costs():
    # A pit (spare) 4 away and a cut 1 away that is used up: one more unit of need comes from the pit, one more of cut
    # saves a trip to it.
    plan = solve_transport(
        np.array([5.0, 100.0]), np.array([8.0]), matrix_costs([1], [4]), spare_rows=np.array([False, True])
    )
    assert plan.cost == 5 * 1 + 3 * 4
    assert plan.column_marginal.tolist() == [4.0]
    assert plan.row_marginal.tolist() == [-3.0, 0.0]
    assert plan.unused.tolist() == [0.0, 97.0]


def test_one_more_unit_without_a_place_is_infinite():
    plan = solve_transport(np.array([5.0]), np.array([5.0]), matrix_costs([1]))
    assert plan.row_marginal.tolist() == [np.inf]
    assert plan.column_marginal.tolist() == [np.inf]


def test_two_ways_of_the_same_cost_are_ties():
    plan = solve_transport(np.array([1.0, 1.0]), np.array([1.0, 1.0]), matrix_costs([1, 1], [1, 1]))
    used = set(zip(plan.rows.tolist(), plan.columns.tolist(), strict=True))
    assert used | set(map(tuple, plan.ties.tolist())) == {(0, 0), (0, 1), (1, 0), (1, 1)}


def test_no_ties_where_there_are_none():
    plan = solve_transport(np.array([1.0, 1.0]), np.array([1.0, 1.0]), matrix_costs([1, 2], [2, 1]))
    assert plan.ties.shape == (0, 2)


def test_capacity_without_limit():
    # All of the need from the nearer pit, all of the rest to the only tip; neither limit binds.
    plan = solve_transport(
        np.array([10.0, np.inf, np.inf]),
        np.array([30.0, np.inf]),
        matrix_costs([9, 1], [2, np.inf], [3, np.inf]),
        spare_rows=np.array([False, True, True]),
        spare_columns=np.array([False, True]),
    )
    assert plan.cost == 30 * 2 + 10 * 1
    assert plan.column_marginal.tolist() == [2.0, 0.0]


def test_nothing_to_move():
    plan = solve_transport(np.zeros(2), np.zeros(1), matrix_costs([1], [2]))
    assert plan.cost == 0.0
    assert len(plan.rows) == 0


# --- against other solvers ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(120))
def test_cost_marginals_and_feasibility_agree_with_a_linear_program(seed):
    supply, need, cost, spare_rows, spare_columns = random_case(seed)
    other = by_linear_program(supply, need, cost, spare_rows, spare_columns)
    try:
        plan = solve_transport(supply, need, Costs.of_matrix(cost), spare_rows=spare_rows, spare_columns=spare_columns)
    except TransportInfeasible as error:
        assert other.status == 2
        check_cut(error, supply, need, cost, spare_rows, spare_columns)
        return
    assert other.status == 0
    assert plan.cost == pytest.approx(other.fun, abs=1e-9)
    step = 1e-3
    for amounts, marginals in ((supply, plan.row_marginal), (need, plan.column_marginal)):
        for k in range(len(amounts)):
            amounts[k] += step
            more = by_linear_program(supply, need, cost, spare_rows, spare_columns)
            amounts[k] -= step
            expected = (more.fun - other.fun) / step if more.status == 0 else np.inf
            assert marginals[k] == pytest.approx(expected, abs=1e-6)


def check_cut(error, supply, need, cost, spare_rows, spare_columns):
    """The rows and columns named prove that nothing can be done: no one else could help, and the amounts fall short."""
    rows, columns = error.rows, error.columns
    assert error.amount > 0
    if error.shortage:
        assert set(np.flatnonzero(np.isfinite(cost[:, columns]).any(axis=1))) <= set(rows)
        assert need[columns].sum() - supply[rows].sum() == pytest.approx(error.amount)
        assert not spare_columns[columns].any()
    else:
        assert set(np.flatnonzero(np.isfinite(cost[rows]).any(axis=0))) <= set(columns)
        assert supply[rows].sum() - need[columns].sum() == pytest.approx(error.amount)
        assert not spare_rows[rows].any()


@pytest.mark.parametrize("seed", range(5))
def test_integer_instances_agree_with_networkx_to_the_last_unit(seed):
    networkx = pytest.importorskip("networkx")
    supply, need, places, sites = straight_case(25, seed)
    cost = np.rint(Costs.straight(places, sites).block() * 100)
    graph = networkx.DiGraph()
    for i, amount in enumerate(supply):
        graph.add_node(("cut", i), demand=-int(amount))
    for j, amount in enumerate(need):
        graph.add_node(("fill", j), demand=int(amount))
    for (i, j), weight in np.ndenumerate(cost):
        graph.add_edge(("cut", i), ("fill", j), weight=int(weight))
    expected = networkx.cost_of_flow(graph, networkx.min_cost_flow(graph))
    plan = solve_transport(supply, need, Costs.of_matrix(cost))
    assert round(plan.cost) == expected
    assert plan.cost == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize("all_moves", [200_000, 5])
@pytest.mark.parametrize("seed", range(30))
def test_unlike_ratios_agree_with_a_linear_program(seed, all_moves, monkeypatch):
    monkeypatch.setattr("earthwork.plan.transport_lp._ALL_MOVES", all_moves)
    rng = np.random.default_rng(seed)
    n, m = rng.integers(4, 15, 2)
    weight = rng.uniform(0.5, 2, (3, 3))
    costs = Costs(
        rate=rng.uniform(0.5, 2, n), way=np.ones(m), table=rng.uniform(0, 5, (3, 3)),
        row_class=rng.integers(0, 3, n), column_class=rng.integers(0, 3, m),
        row_place=rng.uniform(0, 10, (n, 2)), column_place=rng.uniform(0, 10, (m, 2)),
    )  # fmt: skip
    supply, need = rng.uniform(0, 10, n), rng.uniform(0, 10, m)
    spare_rows, spare_columns = np.arange(n) % 2 == 0, np.arange(m) % 2 == 0
    by_pair = weight[costs.row_class][:, costs.column_class]
    other = by_linear_program(supply, need, costs.block(), spare_rows, spare_columns, by_pair)
    if other.status == 2:
        with pytest.raises(TransportInfeasible, match="cannot be placed"):
            solve_transport(supply, need, costs, weight=weight, spare_rows=spare_rows, spare_columns=spare_columns)
        return
    plan = solve_transport(supply, need, costs, weight=weight, spare_rows=spare_rows, spare_columns=spare_columns)
    assert plan.cost == pytest.approx(other.fun, rel=1e-8)
    assert plan.certificate.relative_gap <= 1e-8


def test_weights_that_factor_stay_a_network():
    # Mass to volume: a tonne of soil 0 makes 0.5 m³, of soil 1 0.625 m³, 1.2 times that in the second zone.
    weight = np.array([[0.5], [0.625]]) * np.array([[1.0, 1.2]])
    costs = Costs(
        rate=np.ones(2), way=np.ones(2), table=np.zeros((2, 2)), row_class=np.array([0, 1]),
        column_class=np.array([0, 1]), distance=np.array([[10.0, 40.0], [30.0, 20.0]]),
    )  # fmt: skip
    plan = solve_transport(
        np.array([100.0, 100.0]), np.array([50.0, 60.0]), costs, weight=weight, spare_rows=np.array([True, True])
    )
    assert plan.certificate.method.startswith("network simplex")
    # 100 of soil 0 fill zone 0 (50 / 0.5), 80 of soil 1 fill zone 1 (60 / 0.75): 100 × 10 + 80 × 20.
    assert plan.cost == pytest.approx(2600)
    # One more m³ in zone 1 takes 1/0.75 of soil 1 over 20 m.
    assert plan.column_marginal[1] == pytest.approx(20 / 0.75)


# --- large problems -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("as_matrix", [False, True])
def test_candidate_moves_find_the_plan_of_all_moves(as_matrix, monkeypatch):
    supply, need, places, sites = straight_case(300, 3)
    costs = Costs.straight(places, sites)
    whole = solve_transport(supply, need, costs)
    monkeypatch.setattr(transport, "DENSE_MOVES", 1000)
    monkeypatch.setattr("earthwork.plan.transport_sparse._CLUSTERS", 30)
    sparse = solve_transport(supply, need, Costs.of_matrix(costs.block()) if as_matrix else costs)
    assert "candidate" in sparse.certificate.method
    assert sparse.cost == pytest.approx(whole.cost, rel=1e-10)
    assert sparse.certificate.relative_gap <= 1e-9
    assert sparse.certificate.moves_checked == 300 * 300 + 1


def test_candidate_moves_keep_to_what_is_allowed(monkeypatch):
    supply, need, places, sites = straight_case(200, 4)
    half = np.arange(200) % 2
    costs = replace(
        Costs.straight(places, sites), table=np.array([[0.0, np.inf], [3.0, 0.0]]), row_class=half, column_class=half
    )
    spare = np.zeros(200, bool)
    spare[:4] = True
    supply[:4] = np.inf
    args = {"spare_rows": spare, "spare_columns": spare}
    whole = solve_transport(supply, need, costs, **args)
    monkeypatch.setattr(transport, "DENSE_MOVES", 1000)
    monkeypatch.setattr("earthwork.plan.transport_sparse._CLUSTERS", 20)
    sparse = solve_transport(supply, need, costs, **args)
    assert sparse.cost == pytest.approx(whole.cost, rel=1e-10)
    assert sparse.column_marginal == pytest.approx(whole.column_marginal, rel=1e-9, abs=1e-9)


# --- properties ---------------------------------------------------------------------------------------------------


def test_rows_add_up_to_supply_and_columns_to_need():
    rng = np.random.default_rng(5)
    supply, need = rng.uniform(1, 5e5, 80), rng.uniform(1, 5e5, 60)
    need *= supply.sum() / need.sum()
    plan = solve_transport(supply, need, Costs.straight(rng.uniform(0, 1e3, (80, 2)), rng.uniform(0, 1e3, (60, 2))))
    assert np.bincount(plan.rows, plan.amounts) == pytest.approx(supply, rel=1e-13)
    assert np.bincount(plan.columns, plan.amounts) == pytest.approx(need, rel=1e-9)


@pytest.mark.parametrize("seed", range(10))
def test_a_second_identical_pit_never_costs_more(seed):
    supply, need, places, sites = straight_case(12, seed)
    need *= 1.5
    supply, places = np.append(supply, 1e4), np.vstack([places, [[500.0, 500.0]]])
    once = solve_transport(supply, need, Costs.straight(places, sites), spare_rows=np.arange(13) == 12)
    supply, places = np.append(supply, 1e4), np.vstack([places, places[-1:]])
    twice = solve_transport(supply, need, Costs.straight(places, sites), spare_rows=np.arange(14) >= 12)
    assert twice.cost <= once.cost * (1 + 1e-12)


@pytest.mark.parametrize("factor", [1e-9, 1e12])
def test_scale_of_amounts_and_of_places_does_not_matter(factor):
    supply, need, places, sites = straight_case(20, 7)
    plan = solve_transport(supply, need, Costs.straight(places, sites))
    more = solve_transport(supply * factor, need * factor, Costs.straight(places, sites))
    longer = solve_transport(supply, need, Costs.straight(places * factor, sites * factor))
    assert more.cost == pytest.approx(plan.cost * factor, rel=1e-12)
    assert longer.cost == pytest.approx(plan.cost * factor, rel=1e-12)


# --- the certificate and bad input --------------------------------------------------------------------------------


def test_the_certificate_refuses_a_plan_that_is_not_the_cheapest():
    n = transport.solve_network(
        np.array([1.0, 1.0]), np.array([1.0, 1.0]), matrix_costs([1, 2], [2, 1]), np.zeros(2, bool), np.zeros(2, bool)
    )
    certify(n)
    wrong = replace(n, rows=np.array([0, 1]), columns=np.array([1, 0]), flow=np.array([1.0, 1.0]))
    with pytest.raises(PlanError, match=r"proven to within 5.0e-01 only; it must be 1e-08"):
        certify(wrong)


@pytest.mark.parametrize(
    ("supply", "need", "message"),
    [
        ([-1.0], [1.0], "supply has a negative or missing amount"),
        ([1.0], [np.nan], "need has a negative or missing amount"),
        ([np.inf], [1.0], "supply is without limit where all of it must move"),
        ([1.0, 2.0], [1.0], r"supply has shape \(2,\)"),
    ],
)
def test_amounts_that_make_no_problem(supply, need, message):
    with pytest.raises(ValueError, match=message):
        solve_transport(np.array(supply), np.array(need), matrix_costs([1]))


def test_too_little_supply_names_the_columns_and_the_amount():
    with pytest.raises(TransportInfeasible, match="1 sinks lack a source: 4 cannot be placed") as caught:
        solve_transport(
            np.array([9.0, 2.0]), np.array([3.0, 6.0]), matrix_costs([1, np.inf], [1, 1]),
            spare_rows=np.array([True, True]),
        )  # fmt: skip
    assert caught.value.columns.tolist() == [1]
    assert caught.value.rows.tolist() == [1]


def test_too_little_room_names_the_rows_and_the_amount():
    with pytest.raises(TransportInfeasible, match="2 sources lack a sink: 3 cannot be placed") as caught:
        solve_transport(
            np.array([5.0, 6.0]),
            np.array([4.0, 4.0]),
            matrix_costs([1, 1], [1, 1]),
            spare_columns=np.array([True, True]),
        )
    assert caught.value.rows.tolist() == [0, 1]
