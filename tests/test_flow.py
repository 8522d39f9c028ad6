"""Load flows of many islands: each as if it were alone, a spoilt one without harm to the rest."""

import numpy as np
import pandas as pd
import pytest

from convert.flow import Rows, solve, sound

N = 5


def rows(**changes) -> Rows:
    """Invented units of very unlike rating, 11/0.4 kV, z = 4 + j0 to 6 %, no magnetising branch."""
    trafo = pd.DataFrame(
        {
            "name": [f"T{n}" for n in range(N)],
            "std_type": None, "hv_bus": 0, "lv_bus": 0,
            "sn_mva": [0.01, 0.25, 1.0, 40.0, 0.2],
            "vn_hv_kv": 11.0, "vn_lv_kv": 0.4,
            "vk_percent": 5.0, "vkr_percent": 1.0, "pfe_kw": 0.0, "i0_percent": 0.0,
            "shift_degree": 150.0, "tap_side": None, "tap_neutral": np.nan, "tap_min": np.nan,
            "tap_max": np.nan, "tap_step_percent": np.nan, "tap_step_degree": np.nan,
            "tap_pos": np.nan, "tap_changer_type": None, "parallel": 1, "df": 1.0,
            "in_service": True,
        }
    )  # fmt: skip
    for column, value in changes.items():
        trafo[column] = value
    kv = np.tile([11.0, 0.4], (N, 1))
    return Rows(trafo, kv, np.full((N, 2), "bus", dtype=object), np.ones(N))


def fed_from_hv() -> np.ndarray:
    return np.tile([1.0, np.nan], (N, 1))


def test_without_load_or_shunt_both_sides_have_the_same_volts():
    flow = solve(rows(), fed_from_hv())
    assert flow.vm == pytest.approx(np.ones((N, 2)), abs=1e-11)
    assert flow.i == pytest.approx(np.zeros((N, 2)), abs=1e-9)


def test_the_shift_is_a_lag_of_the_low_voltage_side():
    flow = solve(rows(), fed_from_hv(), angles=True)
    assert flow.va[:, 1] == pytest.approx(np.full(N, -150.0), abs=1e-9)


def test_an_impedance_load_divides_the_volts_as_ohm_s_law_says():
    # a rated load at cosφ 1 is 1 pu of resistance behind r + jx
    size = rows().trafo["sn_mva"].to_numpy()
    flow = solve(rows(), fed_from_hv(), shunt=size.astype(complex))
    x = np.sqrt(0.05**2 - 0.01**2)
    assert flow.vm[:, 1] == pytest.approx(np.full(N, 1 / abs(1 + 0.01 + 1j * x)), abs=1e-11)


@pytest.mark.parametrize(
    ("column", "value"),
    [("vk_percent", [5.0, 5.0, 0.0, 5.0, 5.0]), ("sn_mva", [0.01, 0.25, "two", 40.0, 0.2]),
     ("vkr_percent", [1.0, 1.0, 9.0, 1.0, 1.0]), ("in_service", [True, True, False, True, True])],
)  # fmt: skip
def test_a_row_that_no_load_flow_can_take_is_left_without_a_result(column, value):
    spoilt = rows(**{column: value})
    assert sound(spoilt).tolist() == [True, True, False, True, True]
    vm = solve(spoilt, fed_from_hv()).vm
    assert np.isnan(vm[2]).all()
    assert np.isfinite(vm[[0, 1, 3, 4]]).all()


def test_a_load_that_has_no_solution_is_found_and_its_neighbours_are_solved():
    # constant current of 30 times rated: no volts are left for it
    size = rows().trafo["sn_mva"].to_numpy().astype(complex)
    size[4] *= 30  # T4 shares its decade of rating with T1
    vm = solve(rows(), fed_from_hv(), current=size).vm
    assert np.isnan(vm[4]).all()
    assert np.isfinite(vm[:4]).all()
