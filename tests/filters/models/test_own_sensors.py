"""Sensors of a user's own: compiled as the shipped ones are, and what may be wrong with them."""

import math
import pickle
import sys

import numpy as np
import pytest
from numba import njit

from filters.compiled import COMPILING, CompiledCodeError, raising_what_compiled_code_raised
from filters.models.sensor import OwnSensor, RangeBearingSensor
from filters.models.sensor.own_file import OwnFileError, load, source_of

POLAR = """
import math

def polar(parameters, site, state, out):
    out[0] = math.hypot(state[0] - site[0], state[1] - site[1])
    out[1] = math.atan2(state[1] - site[1], state[0] - site[0])
"""
JACOBIAN = """
def polar_jacobian(parameters, site, state, out):
    east, north = state[0] - site[0], state[1] - site[1]
    square = east * east + north * north
    out[0, 0] = east / math.sqrt(square)
    out[0, 1] = north / math.sqrt(square)
    out[1, 0] = -north / square
    out[1, 1] = east / square
"""
TIMES = np.arange(3.0)
SHIPPED = RangeBearingSensor(
    kind="range-bearing",
    position_m=(10.0, -20.0),
    noise_sd_range_m=5.0,
    noise_sd_bearing_deg=1.0,
    region_range_m=(0.0, 1000.0),
    detection_probability=0.9,
    clutter_density_per_m_deg=1e-5,
)


@pytest.fixture
def own(tmp_path):
    """Write a file and return a sensor of it."""

    def make(text, name="polar", **keys):
        (tmp_path / "own.py").write_text(text)
        given = {
            "kind": f"own.py:{name}",
            "position_m": (10.0, -20.0),
            "measurement_units": ("m", "deg"),
            "noise_sd": (5.0, 1.0),
            "measurement_region": ((0.0, 1000.0), (-180.0, 180.0)),
            "detection_probability": 0.9,
            "clutter_density": 1e-5,
        }
        return OwnSensor.model_validate(given | keys, context={"folder": tmp_path})

    return make


@njit
def _call(function, parameters, site, state, out):
    function(parameters, site, state, out)


def compiled_call(function, model, site, state, shape):
    out = np.full(shape, np.nan)
    _call(function, model.parameters, np.asarray(site, float), np.asarray(state, float), out)
    return out


STATES = [
    [100.0, 50.0, 1.0, 2.0],
    [-300.0, -20.0, 1.0, 2.0],  # right on the cut
    [-300.0, -20.001, 1.0, 2.0],
    [10.5, -20.0, 1.0, 2.0],
    [2e5, -1e5, 300.0, 2.0],
]


@pytest.mark.parametrize("jacobian", ["", JACOBIAN])
def test_an_own_sensor_is_the_shipped_one_of_the_same_formula(own, jacobian):
    """Everything a kernel is handed; central differences agree with the derivative to 1e-7."""
    model, shipped = own(POLAR + jacobian).sensor_model(TIMES), SHIPPED.sensor_model(TIMES)
    for field in ("sites", "periods", "region_centre", "region_half_width", "same_noise"):
        np.testing.assert_allclose(getattr(model, field), getattr(shipped, field))
    site = model.sites[0]
    for state in STATES:
        for field, shape in (("measure", (2,)), ("jacobian", (2, 4)), ("noise", (2, 2))):
            found, expected = (
                compiled_call(getattr(one, field), one, site, state, shape)
                for one in (model, shipped)
            )
            largest = np.abs(expected).max(axis=-1, keepdims=True)
            np.testing.assert_allclose(found / largest, expected / largest, rtol=0, atol=1e-7)
    clutter, shipped_clutter = (one.clutter_model(TIMES) for one in (own(POLAR), SHIPPED))
    np.testing.assert_allclose(clutter.boxes, shipped_clutter.boxes)


def test_the_function_is_given_the_parameters_of_the_study_behind_those_of_the_noise(own):
    text = (
        "def scaled(parameters, site, state, out):\n"
        "    for i in range(2):\n"
        "        out[i] = parameters[i] * state[0] + parameters[2]\n"
    )
    keys = {"parameters": (2.0, 3.0, 7.0), "measurement_units": ("m", "m")}
    keys |= {"measurement_region": ((-900.0, 900.0),) * 2}
    for factors in (None, ((0.0, 1.0), (50.0, 2.0))):
        record = own(text, "scaled", noise_factor_over_range=factors, **keys)
        model = record.sensor_model(TIMES)
        found = compiled_call(model.measure, model, np.zeros(4), [10.0, 0, 0, 0], (2,))
        np.testing.assert_array_equal(found, [27.0, 37.0])


def test_functions_may_use_arrays_and_be_compiled_already(own):
    text = (
        "import numpy as np\nfrom numba import njit\n"
        "@njit\n"
        "def polar(parameters, site, state, out):\n"
        "    offset = state[:2] - site[:2]\n"
        "    out[0] = np.sqrt(np.sum(offset**2))\n"
        "    out[1] = np.arctan2(offset[1], offset[0])\n"
    )
    model = own(text).sensor_model(TIMES)
    found = compiled_call(model.measure, model, model.sites[0], STATES[0], (2,))
    np.testing.assert_allclose(found, [math.hypot(90, 70), math.atan2(70, 90)], rtol=1e-14)


def test_the_file_is_a_module_of_the_same_private_name_everywhere(own):
    record = own(POLAR)
    name = load(record.source).measure.__module__
    assert name.startswith("trackassay_own_")
    assert name in sys.modules
    again = pickle.loads(pickle.dumps(record))
    assert again == record
    assert again.source == record.source


def test_a_changed_file_is_loaded_anew(own):
    first = own(POLAR)
    before, digest = first.functions()[0], first.code_digest()
    second = own(POLAR.replace("math.hypot(", "2 * math.hypot("))
    assert second.code_digest() != digest
    model = second.sensor_model(TIMES)
    assert model.measure is not before
    assert compiled_call(model.measure, model, np.zeros(4), [3.0, 4.0, 0, 0], (2,))[0] == 10.0


def test_its_axes_are_those_of_its_place(own):
    assert own(POLAR).axes == 2
    assert own(POLAR, position_m=None).axes == 2
    assert own(POLAR, position_m=(1.0, 2.0, 3.0)).axes == 3


# What is wrong with a file


def try_out(record, state=(100.0, 50.0, 1.0, 2.0)):
    record.try_out(TIMES, np.array(state))


def test_a_file_that_works_passes(own):
    try_out(own(POLAR))
    try_out(own(POLAR + JACOBIAN))


AT = "at site [10, -20, 0, 0] and state [100, 50, 1, 2]"
FAULTS = {
    "an import that fails": (
        "import no_such_package\n" + POLAR,
        "cannot be imported: ModuleNotFoundError: No module named 'no_such_package'; "
        "see what python own.py says",
    ),
    "no Python": (
        POLAR + "\nif:\n",
        "cannot be imported: SyntaxError: invalid syntax (own.py, line 8); "
        "see what python own.py says",
    ),
    "a file that stops": (
        POLAR + "\nraise SystemExit(3)\n",
        "cannot be imported: SystemExit: 3; see what python own.py says",
    ),
    "another name": (
        POLAR.replace("polar", "bipolar") + "\ndef other(parameters, site, state, out): pass\n",
        "names no function of that file, which has bipolar, other; correct the name",
    ),
    "nothing at all": ("", "names no function of that file, which has none; correct the name"),
    "a function that raises": (
        POLAR + "    raise RuntimeError('no signal')\n",
        f"raises RuntimeError: no signal {AT}; correct the function",
    ),
    "other arguments": (
        "def polar(state, out): pass\n",
        f"raises TypeError: polar() takes 2 positional arguments but 4 were given {AT}; "
        "correct the function",
    ),
    "no number": (
        POLAR + "    out[1] = math.nan\n",
        f"measures [114.018, nan] {AT}; write a number into each entry of out",
    ),
    "a component left out": (
        POLAR.replace("    out[1]", "    bearing"),
        f"measures [114.018, nan] {AT}; write a number into each entry of out",
    ),
    "what does not compile": (
        POLAR + "    out[1] += float(str(0))\n",
        "does not compile: ",
    ),
    "a wrong Jacobian": (
        POLAR + JACOBIAN.replace("-north / square", "north / square"),
        "has a Jacobian whose row 1 is [0.00538462, 0.00692308, 0, 0] where central differences "
        f"give [-0.00538462, 0.00692308, 0, 0], {AT}; correct NAME_jacobian, or leave it out",
    ),
    "a Jacobian that raises": (
        POLAR + JACOBIAN + "    raise ValueError\n",
        f"raises ValueError {AT}; correct the function",
    ),
}


@pytest.mark.parametrize("name", FAULTS)
def test_a_fault_is_named_when_the_file_is_tried_out(own, name):
    if name == "what does not compile" and not COMPILING:
        pytest.skip("plain Python runs it")
    text, expected = FAULTS[name]
    with pytest.raises(OwnFileError) as raised:
        try_out(own(text))
    if expected.endswith(": "):
        assert str(raised.value).startswith(expected)
        assert str(raised.value).endswith("; use what numba can compile: scalars, loops, math")
    else:
        assert str(raised.value) == expected


def test_a_missing_file_is_named_by_its_whole_path(tmp_path):
    path = tmp_path / "gone.py"
    with pytest.raises(OwnFileError) as raised:
        source_of(path, "polar")
    assert str(raised.value) == (
        f"names a file that does not exist: {path}; "
        "a path is taken from the folder of the study file"
    )


def test_a_file_that_could_not_be_imported_leaves_no_module_behind(own):
    before = set(sys.modules)
    with pytest.raises(OwnFileError):
        try_out(own("raise ValueError('half done')\n"))
    assert not [name for name in set(sys.modules) - before if name.startswith("trackassay_own_")]


@pytest.mark.skipif(not COMPILING, reason="plain Python swallows nothing")
@pytest.mark.parametrize("jacobian", ["", JACOBIAN])
@pytest.mark.parametrize("fault", ["raise ValueError('too far')", "out[0] = math.inf"])
def test_a_fault_at_some_states_only_is_not_swallowed_by_compiled_code(own, jacobian, fault):
    """The function works at its trial, and is at fault beyond 500 m when kernels call it."""
    text = POLAR + f"    if state[0] > 500.0:\n        {fault}\n" + jacobian
    record = own(text)
    try_out(record)
    model = record.sensor_model(TIMES)
    with pytest.raises(CompiledCodeError), raising_what_compiled_code_raised():
        compiled_call(model.measure, model, np.zeros(4), [600.0, 0, 0, 0], (2,))
    if not jacobian:
        with pytest.raises(CompiledCodeError), raising_what_compiled_code_raised():
            compiled_call(model.jacobian, model, np.zeros(4), [600.0, 0, 0, 0], (2, 4))
