"""What can be wrong, as values: a problem's one line, a finding's columns, the one exception."""

import dataclasses
import pickle

import pytest

from convert.errors import BranchwrightError, Finding, Problem, Severity

#: the columns of findings.csv in their order, from the contract of the outputs
COLUMNS = [
    "severity",
    "subject",
    "rule",
    "reading",
    "found",
    "expected",
    "effect",
    "likely_cause",
    "source",
    "units",
]


def test_a_problem_says_where_what_was_read_and_what_is_expected():
    problem = Problem("mill.yaml", 17, "transformers.T1.hv", "'66 kW'", "a voltage", "write kV")
    text = str(problem)
    assert text == "mill.yaml:17: transformers.T1.hv: read '66 kW'; expected a voltage; write kV"


def test_a_problem_without_line_key_or_mend_has_no_empty_places():
    text = str(Problem("mill.yaml", None, "", "nothing", "a sheet"))
    assert text == "mill.yaml: read nothing; expected a sheet"


def test_a_finding_has_the_columns_of_the_contract_in_their_order():
    assert [field.name for field in dataclasses.fields(Finding)] == COLUMNS


def test_a_finding_speaks_for_one_unit_unless_it_says_more():
    assert Finding(Severity.NOTE, "T1", "a-rule").units == 1


def test_values_do_not_change_once_made():
    with pytest.raises(dataclasses.FrozenInstanceError):
        Finding(Severity.NOTE, "T1", "a-rule").rule = "another"  # type: ignore[misc]
    with pytest.raises(dataclasses.FrozenInstanceError):
        Problem("a", 1, "", "", "").line = 2  # type: ignore[misc]


def test_the_severities_are_the_words_that_are_written():
    assert [severity.value for severity in Severity] == ["error", "caution", "note"]
    assert str(Severity.CAUTION) == "caution"


def test_the_exception_keeps_every_problem_and_prints_a_line_each():
    first, second = Problem("a.yaml", 1, "k", "x", "y"), "b.csv: is a file"
    error = BranchwrightError([first, second])
    assert error.problems == (first, second)
    assert str(error).splitlines() == [str(first), second]


def test_the_exception_survives_another_process():
    # a planner's script may build stations in parallel; a worker's error must arrive whole
    error = BranchwrightError([Problem("a.yaml", 1, "k", "x", "y"), "b.csv: is a file"])
    again = pickle.loads(pickle.dumps(error))
    assert [str(problem) for problem in again.problems] == [str(p) for p in error.problems]


def test_there_is_one_exception_of_our_own_and_it_is_no_library_s():
    assert BranchwrightError.__mro__[1] is Exception
