"""Tables, constants, and the viscosity law through two points."""

import math
import pickle

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calcbook.properties import PropertyFault, astm_d341, constant, tabulated

OIL = {
    "density": ([293.15, 333.15, 373.15], [880.0, 855.0, 830.0]),
    "heat capacity": ([293.15, 373.15], [1900.0, 2200.0]),
    "conductivity": ([293.15, 373.15], [0.135, 0.129]),
    "viscosity": ([293.15, 333.15, 373.15], [0.2, 0.03, 0.007]),
}


def test_viscosity_law_of_the_standard():
    # ASTM D341 with 68.0 mm2/s at 40 C and 8.5 mm2/s at 100 C, worked independently
    law = astm_d341(((313.15, 68.0e-6), (373.15, 8.5e-6)))
    assert pytest.approx(9.447002, abs=5e-7) == law.A
    assert pytest.approx(3.679413, abs=5e-7) == law.B
    assert law.value(333.15) == pytest.approx(28.3233e-6, rel=2e-6)


# ISO VG grades of viscosity index 95: mm2/s at 40 C and 100 C (ASTM D2270), then A, B and mm2/s at
# 20, 60, 80 C by ASTM D341, worked independently.
ISO_VG = [
    (10.0, 2.6367, 9.644178, 3.859197, 20.58, 5.766, 3.739),
    (32.0, 5.2895, 9.675537, 3.804566, 87.78, 15.029, 8.392),
    (68.0, 8.5304, 9.425882, 3.67095, 218.353, 28.375, 14.49),
    (100.0, 11.0657, 9.220238, 3.573492, 342.689, 39.616, 19.416),
    (220.0, 18.7501, 8.883299, 3.411147, 861.433, 78.295, 35.223),
    (460.0, 30.35, 8.675201, 3.305521, 2053.836, 147.386, 60.969),
    (1500.0, 64.2154, 8.49029, 3.200786, 8382.428, 402.307, 144.448),
]


@pytest.mark.parametrize("row", ISO_VG)
def test_viscosity_law_of_the_iso_grades(row):
    at_40, at_100, constant_a, constant_b, at_20, at_60, at_80 = row
    law = astm_d341(((373.15, at_100 * 1e-6), (313.15, at_40 * 1e-6)))
    # the viscosity at 100 C is given with five figures: 1e-4 in A and B, 5e-4 in the viscosities
    assert pytest.approx(constant_a, rel=1e-4) == law.A
    assert pytest.approx(constant_b, rel=1e-4) == law.B
    found = 1e6 * law.value(np.array([293.15, 333.15, 353.15]))
    assert found == pytest.approx([at_20, at_60, at_80], rel=5e-4)


@given(st.floats(3.0, 2000.0), st.floats(1.5, 20.0), st.floats(300.0, 400.0))
@settings(deadline=None)
def test_viscosity_law_meets_its_points_and_its_slope(thick, ratio, at):
    thin = max(thick / ratio, 1.0)
    law = astm_d341(((313.15, thick * 1e-6), (373.15, thin * 1e-6)))
    # The standard's inverse is an approximation: 0.1 % from 1 mm2/s upwards.
    assert law.value([313.15, 373.15]) == pytest.approx([thick * 1e-6, thin * 1e-6], rel=1e-3)
    step = 1e-3
    difference = (law.value(at + step) - law.value(at - step)) / (2.0 * step)
    # rounding of the value (1e-14, of two powers of ten) over 2e-3 K; curvature below 1e-6 of the slope
    assert law.slope(at) == pytest.approx(difference, rel=1e-6, abs=1e-11 * float(law.value(at)))
    assert law(at) == law.value(at)


@pytest.mark.parametrize(
    "points",
    [
        ((313.15, 68e-6),),
        ((313.15, 68e-6), (313.15, 8e-6)),
        ((313.15, 8e-6), (373.15, 68e-6)),
        ((313.15, 68e-6), (373.15, -8e-6)),
        ((313.15, float("nan")), (373.15, 8e-6)),
    ],
)
def test_viscosity_points_that_make_no_law(points):
    with pytest.raises(PropertyFault) as caught:
        astm_d341(points)
    assert caught.value.code == "viscosity-points"


def test_table_is_straight_between_rows():
    oil = tabulated(OIL, name="wash oil").at(None)
    assert oil.value("density", [293.15, 313.15, 333.15, 353.15, 373.15]) == pytest.approx(
        [880.0, 867.5, 855.0, 842.5, 830.0], rel=1e-14
    )
    assert oil.value("heat capacity", 333.15) == pytest.approx(2050.0, rel=1e-14)
    assert oil.slope("conductivity", 300.0) == pytest.approx(-0.006 / 80.0, rel=1e-13)


def test_table_viscosity_is_straight_in_its_logarithm():
    oil = tabulated(OIL).at(None)
    assert oil.value("viscosity", 313.15) == pytest.approx(math.sqrt(0.2 * 0.03), rel=1e-14)
    assert oil.slope("viscosity", 313.15) == pytest.approx(
        math.sqrt(0.2 * 0.03) * math.log(0.03 / 0.2) / 40.0, rel=1e-13
    )


def test_table_expansion_is_that_of_its_density():
    oil = tabulated(OIL).at(None)
    assert oil.value("expansion coefficient", 313.15) == pytest.approx(0.625 / 867.5, rel=1e-13)
    step = 0.01
    difference = np.diff(oil.value("expansion coefficient", [313.15 - step, 313.15 + step]))[0] / (2 * step)
    assert oil.slope("expansion coefficient", 313.15) == pytest.approx(difference, rel=1e-6)
    stated = tabulated(OIL | {"expansion coefficient": ([293.15], [7e-4])}).at(None)
    assert stated.value("expansion coefficient", 295.0) == 7e-4


def test_beyond_the_table():
    oil = tabulated(OIL, extrapolate_by=5.0, name="wash oil").at(None)
    assert oil.check_state(300.0) == ()
    (finding,) = oil.check_state(377.0)
    assert (finding.code, finding.level) == ("beyond-table", "open item")
    assert finding.figures == {"temperature": 377.0, "first row": 293.15, "last row": 373.15}
    assert oil.value("density", 377.15) == pytest.approx(830.0 - 0.625 * 4.0, rel=1e-13)
    (finding,) = oil.check_state(380.0)
    assert (finding.code, finding.level) == ("beyond-table", "fault")
    with pytest.raises(PropertyFault) as caught:
        oil.value("density", [300.0, 380.0])
    assert caught.value.code == "beyond-table"
    assert "380 K" in caught.value.message
    assert np.isnan(oil.value("density", [300.0, 380.0], outside="nan")).tolist() == [False, True]
    assert oil.limits() == (288.15, 378.15)


def test_a_property_that_is_not_stated():
    oil = tabulated({"density": ([300.0], [900.0])}).at(None)
    with pytest.raises(PropertyFault) as caught:
        oil.value("viscosity", 300.0)
    assert caught.value.code == "property-missing"
    with pytest.raises(PropertyFault) as caught:
        oil.value("expansion coefficient", 300.0)
    assert caught.value.code == "property-missing"


def test_kinematic_viscosity_by_the_standard_times_density():
    columns = {
        "density": ([293.15, 373.15], [880.0, 830.0]),
        "kinematic viscosity": ([313.15, 373.15], [68e-6, 8.5e-6]),
    }
    oil = tabulated(columns, viscosity_law="astm d341", name="ISO VG 68").at(2e5)
    density = oil.value("density", 333.15)
    # 28.3233 mm2/s at 60 C: ASTM D341, worked independently
    assert oil.value("viscosity", 333.15) == pytest.approx(28.3233e-6 * density, rel=2e-6)
    step = 1e-3
    difference = np.diff(oil.value("viscosity", [333.15 - step, 333.15 + step]))[0] / (2 * step)
    assert oil.slope("viscosity", 333.15) == pytest.approx(difference, rel=1e-7)
    # 313.15 K is the first point; the law is read 40 K beyond it (common practice), but the density ends at
    # 293.15 K and is carried on for 10 K
    assert oil.value("viscosity", 284.0) > oil.value("viscosity", 313.15)
    with pytest.raises(PropertyFault):
        oil.value("viscosity", 282.0)


def test_dynamic_viscosity_by_the_standard_meets_its_points():
    columns = {"density": ([300.0], [860.0]), "viscosity": ([313.15, 373.15], [0.0585, 0.0072])}
    oil = tabulated(columns, viscosity_law="astm d341", extrapolate_by=30.0).at(None)
    # the standard's inverse is within 0.1 % above 1 mm2/s
    assert oil.value("viscosity", 313.15) == pytest.approx(0.0585, rel=1e-3)


def test_tabulated_kinematic_viscosity():
    columns = {
        "density": ([300.0, 400.0], [900.0, 800.0]),
        "kinematic viscosity": ([300.0, 350.0, 400.0], [1e-4, 2e-5, 1e-5]),
    }
    oil = tabulated(columns).at(None)
    assert oil.value("viscosity", 350.0) == pytest.approx(2e-5 * 850.0, rel=1e-13)
    step = 1e-3
    difference = np.diff(oil.value("viscosity", [330.0 - step, 330.0 + step]))[0] / (2 * step)
    assert oil.slope("viscosity", 330.0) == pytest.approx(difference, rel=1e-7)


@pytest.mark.parametrize(
    ("columns", "law", "code"),
    [
        ({}, "log-linear", "table-empty"),
        ({"density": ([300.0, 310.0], [900.0])}, "log-linear", "table-values"),
        ({"density": ([310.0, 300.0], [900.0, 910.0])}, "log-linear", "table-values"),
        ({"density": ([300.0, 300.0], [900.0, 910.0])}, "log-linear", "table-values"),
        ({"density": ([300.0, 310.0], [900.0, -1.0])}, "log-linear", "table-values"),
        ({"density": ([300.0, float("inf")], [900.0, 890.0])}, "log-linear", "table-values"),
        ({"colour": ([300.0], [1.0])}, "log-linear", "property-unknown"),
        ({"density": ([300.0], [900.0])}, "cubic", "viscosity-law-unknown"),
        ({"viscosity": ([300.0, 350.0], [2e-3, 1e-3])}, "astm d341", "property-missing"),
        (OIL | {"kinematic viscosity": ([300.0], [1e-6])}, "log-linear", "table-values"),
        (OIL, "astm d341", "viscosity-points"),
    ],
)
def test_what_cannot_be_a_table(columns, law, code):
    with pytest.raises(PropertyFault) as caught:
        tabulated(columns, viscosity_law=law)
    assert caught.value.code == code


def test_constants():
    fluid = constant({"density": 1000.0, "viscosity": 1e-3, "expansion coefficient": -5e-5}, "test water")
    state = fluid.at(None)
    assert fluid.name == "test water"
    assert fluid.provider == "constants stated in the calculation file"
    assert state.value("density", [[250.0, 900.0]]).tolist() == [[1000.0, 1000.0]]
    assert state.slope("viscosity", 300.0) == 0.0
    assert state.pressure_slope("density", 300.0) == 0.0
    assert state.value("expansion coefficient", 300.0) == -5e-5
    assert state.check_state(300.0) == ()
    with pytest.raises(PropertyFault) as caught:
        state.value("conductivity", 300.0)
    assert caught.value.code == "property-missing"


@pytest.mark.parametrize("values", [{}, {"density": 0.0}, {"colour": 1.0}, {"kinematic viscosity": 1e-6}])
def test_what_cannot_be_constants(values):
    with pytest.raises(PropertyFault):
        constant(values)


def test_fluids_and_faults_travel_between_processes():
    fluid = tabulated(OIL, name="wash oil")
    assert pickle.loads(pickle.dumps(fluid)) == fluid
    fault = PropertyFault("fluid-unknown", "no fluid", "a fluid", ("Water",))
    copy = pickle.loads(pickle.dumps(fault))
    assert (copy.code, copy.message, copy.expected, copy.nearest) == (
        "fluid-unknown", "no fluid", "a fluid", ("Water",),
    )  # fmt: skip
