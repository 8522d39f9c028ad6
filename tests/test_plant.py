"""Tables of readings: what is absent, what a result rests on, and the log of the steps."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from convert.plant import Plant, Status, System, Table


def double(x):
    return 2 * x


def add(a, b):
    return a + b


def three() -> Table:
    table = Table(3)
    table.set("a", [1.0, 2.0, np.nan])
    table.set("b", [10.0, 20.0, 30.0], [Status.MEASURED, Status.ASSUMED, Status.GIVEN])
    table.text["name"] = np.array(["T1", "T2", "T3"], dtype=object)
    table.line["a"] = np.array([5, 6, 0], dtype=np.int32)
    table.half_digit["a"] = np.array([0.05, 0.5, np.nan])
    return table


def test_the_statuses_are_ordered_from_the_best_to_the_worst():
    words = [status.name.lower() for status in sorted(Status)]
    assert words == ["absent", "measured", "given", "corrected", "derived", "assumed"]


def test_what_is_not_a_number_is_absent_whatever_its_status():
    table = Table(2)
    table.set("a", [1.0, np.nan], Status.MEASURED)
    assert table.status["a"].tolist() == [Status.MEASURED, Status.ABSENT]
    assert table.has("a").tolist() == [True, False]


def test_a_column_that_was_never_read_is_there_for_no_row():
    table = three()
    assert table.has("none").tolist() == [False] * 3
    assert table.word("none").tolist() == [""] * 3
    with pytest.raises(KeyError):
        table["none"]


def test_a_scalar_fills_a_column_and_complex_stays_complex():
    table = Table(2)
    table.set("u", 11e3)
    table.set("z", [0.1 + 0.2j, 1.0])
    assert table["u"].tolist() == [11e3, 11e3]
    assert table["z"].dtype == np.complex128
    assert table["u"].dtype == np.float64


def test_a_column_is_the_table_s_own():
    given_values = np.array([1.0, 2.0, 3.0])
    table = Table(3)
    table.set("a", given_values)
    given_values[0] = 99.0
    assert table["a"][0] == 1.0


def test_filling_keeps_the_other_rows_and_their_status():
    table = three()
    table.fill("b", np.array([True, False, False]), 7.0, Status.DERIVED)
    assert table["b"].tolist() == [7.0, 20.0, 30.0]
    assert table.status["b"].tolist() == [Status.DERIVED, Status.ASSUMED, Status.GIVEN]


def test_filling_a_new_column_leaves_the_other_rows_absent():
    table = three()
    table.fill("new", np.array([False, True, False]), 7.0, Status.ASSUMED)
    assert table.has("new").tolist() == [False, True, False]


def test_a_result_is_as_good_as_its_worst_argument_and_absent_with_an_absent_one():
    table = three()
    table.put("sum", add, a="a", b="b")
    assert table["sum"][:2].tolist() == [11.0, 22.0]
    assert table.status["sum"].tolist() == [Status.MEASURED, Status.ASSUMED, Status.ABSENT]


def test_a_result_may_be_said_to_be_worse_than_its_arguments():
    table = three()
    table.put("twice", double, at_least=Status.CORRECTED, x="b")
    assert table.status["twice"].tolist() == [Status.CORRECTED, Status.ASSUMED, Status.CORRECTED]


def test_a_result_for_some_rows_leaves_the_others_as_they_were():
    table = three()
    table.put("b", double, where=np.array([True, False, False]), x="b")
    assert table["b"].tolist() == [20.0, 20.0, 30.0]
    assert table.status["b"].tolist() == [Status.MEASURED, Status.ASSUMED, Status.GIVEN]


def test_a_new_result_for_some_rows_is_absent_elsewhere():
    table = three()
    table.put("new", double, where=np.array([False, True, False]), x="b")
    assert table.has("new").tolist() == [False, True, False]


def test_a_result_that_is_no_number_is_absent_and_warns_nobody():
    table = Table(1)
    table.set("a", 0.0)
    table.put("bad", lambda a: a / a, a="a")
    assert table.has("bad").tolist() == [False]


def test_a_step_is_logged_once_with_its_formula_and_columns():
    table = three()
    table.put("sum", add, a="a", b="b")
    table.put("sum", add, where=np.array([True, False, False]), a="b", b="b")
    table.put("sum", add, a="a", b="b")
    assert [(step.out, step.formula, step.columns) for step in table.steps] == [
        ("sum", add, (("a", "a"), ("b", "b"))),
        ("sum", add, (("a", "b"), ("b", "b"))),
    ]


def test_rows_are_taken_with_everything_that_is_known_of_them():
    table = three()
    table.put("sum", add, a="a", b="b")
    part = table.take(np.array([1, 0]))
    assert part.n == 2
    assert part["b"].tolist() == [20.0, 10.0]
    assert part.text["name"].tolist() == ["T2", "T1"]
    assert part.line["a"].tolist() == [6, 5]
    assert part.half_digit["a"].tolist() == [0.5, 0.05]
    assert part.status["b"].tolist() == [Status.ASSUMED, Status.MEASURED]
    assert [step.out for step in part.steps] == ["sum"]


def test_taken_rows_can_be_changed_without_changing_the_table():
    table = three()
    part = table.take(np.array([0, 1, 2]))
    part.set("b", 0.0)
    part.put("new", double, x="b")
    assert table["b"].tolist() == [10.0, 20.0, 30.0]
    assert "new" not in table.steps


@settings(derandomize=True, deadline=None, max_examples=50)
@given(st.lists(st.tuples(*(st.sampled_from(sorted(Status)[1:]),) * 3), min_size=1, max_size=6))
def test_no_result_is_better_than_what_it_rests_on(rows):
    table = Table(len(rows))
    for at, column in enumerate("abc"):
        table.set(column, 1.0, [row[at] for row in rows])
    table.put("out", lambda a, b, c: a + b + c, a="a", b="b", c="c")
    assert table.status["out"].tolist() == [max(row) for row in rows]
    assert table.worst("abc").tolist() == [max(row) for row in rows]


def test_a_plant_starts_with_the_load_points_of_the_contract():
    system = System()
    assert system.load_fractions == (0.25, 0.5, 0.75, 1.0)
    assert system.power_factors == (
        (0.8, "lagging"),
        (0.9, "lagging"),
        (1.0, "unity"),
        (0.9, "leading"),
    )
    assert np.isnan([system.base_power, system.frequency, system.study_temperature]).all()


def test_a_plant_of_no_unit_is_a_plant():
    names = ("busbars", "transformers", "stages", "open_circuit", "short_circuit", "resistance")
    plant = Plant([], System(), **{name: Table(0) for name in names})
    assert plant.transformers.n == 0
