import pytest

from harness.study.study import load_study

PDA = 'kind = "pda"'
SWEEP = '"scene.sensor.noise_sd_m" = [2.0, 4.0]'
SPREADS = "start_position_sd_m = [8.0, 8.0]\nstart_velocity_sd_m_per_s = [1.0, 1.0]"
COVARIANCE = "start_covariance = [[9, 0, 1, 0], [0, 9, 0, 1], [1, 0, 1, 0], [0, 1, 0, 1]]"
AT = "strategies.pda.assumes"


@pytest.fixture
def assuming(study_file):
    """Return scene and assumed scene of each condition, `pda` assuming something."""

    def load(assumes, *edits, sweep=SWEEP):
        study = load_study(study_file((PDA, f"{PDA}\n{assumes}"), (SWEEP, sweep), *edits))
        return [(c.rules.scene, c.cases[0].assumed) for c in study.conditions]

    return load


def differing(scene, assumed):
    """Return the keys of target and sensor that an assumed scene states otherwise."""
    return {
        key: value
        for role in ("target", "sensor")
        for key, value in getattr(assumed, role)
        if getattr(getattr(scene, role), key, None) != value
    }


def test_a_strategy_that_assumes_nothing_is_told_the_scene_itself(study_file):
    for condition in load_study(study_file()).conditions:
        assert all(case.assumed is condition.rules.scene for case in condition.cases)


def test_a_value_replaces_the_scenes_and_the_rest_is_as_in_the_scene(assuming):
    for scene, assumed in assuming("assumes.sensor.detection_probability = 0.7"):
        assert differing(scene, assumed) == {"detection_probability": 0.7}


def test_only_the_strategy_that_assumes_it_is_told_otherwise(study_file):
    study = load_study(study_file((PDA, f"{PDA}\nassumes.sensor.noise_sd_m = 9.0")))
    for condition in study.conditions:
        own, other = condition.cases
        assert own.assumed.sensor.noise_sd_m == 9.0
        assert other.assumed is condition.rules.scene


@pytest.mark.parametrize(
    "assumes",
    [
        "assumes.sensor.noise_sd_m.factor = 1.5",
        "assumes.sensor.noise_sd_m = { factor = 1.5 }",
        "[strategies.pda.assumes.sensor]\nnoise_sd_m.factor = 1.5",
        "[strategies.pda.assumes]\nsensor = { noise_sd_m = { factor = 1.5 } }",
    ],
)
def test_a_factor_multiplies_the_swept_value_of_the_scene(assuming, assumes):
    values = [assumed.sensor.noise_sd_m for _, assumed in assuming(assumes)]
    assert values == [3.0, 6.0]


def test_a_factor_of_a_list_multiplies_each_of_its_entries(assuming):
    (scene, assumed), _ = assuming("assumes.target.start_position_sd_m.factor = 0.5")
    assert differing(scene, assumed) == {"start_position_sd_m": (4.0, 4.0)}


def test_a_factor_of_a_covariance_multiplies_all_of_it(assuming):
    (scene, assumed), _ = assuming(
        "assumes.target.start_covariance.factor = 4.0", (SPREADS, COVARIANCE)
    )
    assert (assumed.target.start_spread() == 4.0 * scene.target.start_spread()).all()


def test_a_factor_of_zero_clutter_is_allowed(assuming):
    (_, assumed), _ = assuming("assumes.sensor.clutter_density_per_m2.factor = 0")
    assert assumed.sensor.clutter_intensity() == 0.0


def test_clutter_stated_in_another_way_replaces_the_scenes(assuming):
    (scene, assumed), _ = assuming("assumes.sensor.clutter_per_scan = 6.4")
    assert differing(scene, assumed) == {"clutter_per_scan": 6.4, "clutter_density_per_m2": None}
    assert assumed.sensor.clutter_intensity() == pytest.approx(6.4 / 800.0**2)


def test_a_covariance_replaces_all_of_the_scenes_standard_deviations(assuming):
    (scene, assumed), _ = assuming("assumes.target." + COVARIANCE)
    assert assumed.target.start_position_sd_m is None
    assert assumed.target.start_spread()[0, 2] == 1.0
    assert scene.target.start_spread()[0, 2] == 0.0


def test_standard_deviations_replace_the_scenes_covariance(assuming):
    spreads = SPREADS.replace("start_", "assumes.target.start_")
    (scene, assumed), _ = assuming(spreads, (SPREADS, COVARIANCE))
    assert scene.target.start_covariance is not None
    assert assumed.target.start_covariance is None
    assert assumed.target.start_spread()[0, 0] == 64.0


def test_another_motion_keeps_only_the_keys_that_it_has(assuming):
    (scene, assumed), _ = assuming(
        'assumes.target.motion = "piecewise-constant-acceleration"\n'
        "assumes.target.acceleration_sd_m_per_s2 = 0.4"
    )
    assert differing(scene, assumed) == {
        "motion": "piecewise-constant-acceleration",
        "acceleration_sd_m_per_s2": 0.4,
    }
    assert not hasattr(assumed.target, "acceleration_psd_m2_per_s3")
    assert assumed.target.start_position_m == scene.target.start_position_m


def test_a_motion_of_a_longer_state_takes_what_it_adds_from_the_assumptions(assuming):
    (_, assumed), _ = assuming(
        "[strategies.pda.assumes.target]\n"
        'motion = "coordinated-turn"\n'
        "turn_rate_psd_deg2_per_s3 = 0.1\n"
        "start_turn_rate_deg_per_s = 0.0\n"
        "start_turn_rate_sd_deg_per_s = 2.0"
    )
    assert assumed.target.state_size == 5
    assert assumed.target.acceleration_psd_m2_per_s3 == 0.05


def test_assumptions_can_be_swept_stated_or_not(assuming):
    key = f"{AT}.sensor.clutter_density_per_m2"
    for stated in ("", "assumes.sensor.clutter_density_per_m2.factor = 0.5"):
        told = assuming(stated, sweep=f'"{key}.factor" = [0.1, 1.0]')
        densities = [assumed.sensor.clutter_density_per_m2 for _, assumed in told]
        assert densities == [0.1 * 2e-5, 2e-5]
    told = assuming(
        "assumes.sensor.clutter_density_per_m2.factor = 0.5", sweep=f'"{key}" = [1e-6, 1e-5]'
    )
    assert [assumed.sensor.clutter_density_per_m2 for _, assumed in told] == [1e-6, 1e-5]


def test_swept_scenes_and_swept_factors_combine(assuming):
    told = assuming("", sweep=f'{SWEEP}\n"{AT}.sensor.noise_sd_m.factor" = [0.5, 2.0]')
    assert [assumed.sensor.noise_sd_m for _, assumed in told] == [1.0, 4.0, 2.0, 8.0]


MISTAKES = {
    "an unknown key": (
        "assumes.sensor.nose_sd_m = 2",
        f"{AT}.sensor.nose_sd_m = 2: is unknown; did you mean noise_sd_m?",
    ),
    "another unit": (
        "assumes.sensor.noise_sd_km = 2",
        f"{AT}.sensor.noise_sd_km = 2: is unknown: here this is stated in m; "
        "write noise_sd_m, in m",
    ),
    "a key of another kind": (
        "assumes.sensor.region_elevation_deg = [0.0, 9.0]",
        f"{AT}.sensor.region_elevation_deg = [0.0, 9.0]: is unknown here: "
        "only kind = range-azimuth-elevation has it; "
        "choose that, or remove it",
    ),
    "an unknown table": (
        "assumes.senser.noise_sd_m = 2",
        f"{AT}.senser: is unknown; did you mean sensor?",
    ),
    "a table like no other": (
        "assumes.xyz = 2",
        f"{AT}.xyz = 2: is unknown; assume target or sensor",
    ),
    "a key without its table": (
        "assumes.noise_sd_m = 2",
        f"{AT}.noise_sd_m = 2: is unknown here; write assumes.sensor.noise_sd_m",
    ),
    "what all strategies share": (
        "assumes.scan_interval_s = 2.0",
        f"{AT}.scan_interval_s = 2.0: is the same for every strategy; "
        "a strategy may assume target and sensor only",
    ),
    "no table": (
        "assumes = 3",
        f"{AT} = 3: must be a table; give its keys under a [table] or in {{ }}",
    ),
    "no table of keys": (
        "assumes.sensor = 3",
        f"{AT}.sensor = 3: must be a table; name its keys: sensor.KEY = value",
    ),
    "a value out of its limits": (
        "assumes.sensor.detection_probability = 1.7",
        f"{AT}.sensor.detection_probability = 1.7: must lie in [0, 1]; give a probability",
    ),
    "true for a number": (
        "assumes.sensor.noise_sd_m = true",
        f"{AT}.sensor.noise_sd_m = true: must be a number, not true or false; "
        "give a positive number, in m",
    ),
    "a product out of its limits": (
        "assumes.sensor.detection_probability.factor = 2",
        f"{AT}.sensor.detection_probability.factor = 2: makes it 1.8, which must lie in [0, 1]; "
        "give a probability",
    ),
    "an infinite product": (
        "assumes.target.start_position_m.factor = 1e308",
        f"{AT}.target.start_position_m.factor = 1e+308: makes it inf, which must be finite; "
        "give a number, in m",
    ),
    "text for a factor": (
        'assumes.sensor.noise_sd_m.factor = "2"',
        f'{AT}.sensor.noise_sd_m.factor = "2": must be a number, not text; write it without quotes',
    ),
    "no number for a factor": (
        "assumes.sensor.noise_sd_m.factor = nan",
        f"{AT}.sensor.noise_sd_m.factor = nan: must be finite; give a number",
    ),
    "something other than a factor": (
        "assumes.sensor.noise_sd_m.fctor = 2",
        f"{AT}.sensor.noise_sd_m.fctor = 2: is no factor; "
        "give a value, or { factor = x } times the scene's",
    ),
    "an empty factor": (
        "assumes.sensor.noise_sd_m = {}",
        f"{AT}.sensor.noise_sd_m: is no factor; "
        "give a value, or { factor = x } times the scene's",
    ),
    "a factor of a name": (
        "assumes.target.motion.factor = 2",
        f"{AT}.target.motion.factor = 2: multiplies what is no number; give a value instead",
    ),
    "a factor of what the scene states otherwise": (
        "assumes.sensor.clutter_per_scan.factor = 2",
        f"{AT}.sensor.clutter_per_scan.factor = 2: has nothing to multiply: "
        "the scene states no clutter_per_scan; multiply clutter_density_per_m2, which it states",
    ),
    "an unknown motion": (
        'assumes.target.motion = "coordinate-turn"',
        f'{AT}.target.motion = "coordinate-turn": is unknown; did you mean coordinated-turn? '
        "there are nearly-constant-velocity, piecewise-constant-acceleration, "
        "nearly-constant-acceleration, singer, coordinated-turn, constant-turn",
    ),
    "a motion that needs more": (
        'assumes.target.motion = "piecewise-constant-acceleration"',
        f"{AT}.target.acceleration_sd_m_per_s2: is missing; add it: standard deviation of the "
        "acceleration held over each interval, along each axis, m/s2",
    ),
    "a sensor that measures something else": (
        'assumes.sensor = { kind = "range-bearing", noise_sd_range_m = 5.0, noise_sd_bearing_deg '
        "= 1.0, region_range_m = [0, 500], clutter_per_scan = 1 }",
        f"{AT}.sensor: measures something else than the scene's sensor; "
        "the detections are the scene's: keep its kind and its number of axes",
    ),
    "half of the standard deviations beside the scene's covariance": (
        "assumes.target.start_position_sd_m = [1.0, 1.0]",
        f"{AT}.target.start_velocity_sd_m_per_s: is missing; give start_velocity_sd_m_per_s, "
        "or start_covariance in place of all spreads",
    ),
}


@pytest.mark.parametrize("name", MISTAKES)
def test_a_mistake_in_an_assumption_is_named_where_it_is_assumed(said_of, name):
    assumes, expected = MISTAKES[name]
    edits = [(SPREADS, COVARIANCE)] if "covariance" in name else []
    line = 25 if "covariance" in name else 26
    assert said_of((PDA, f"{PDA}\n{assumes}"), *edits) == [f"fog.toml:{line}: {expected}"]


def test_a_swept_factor_that_only_some_scenes_bear_is_named_with_such_a_scene(said_of):
    sweep = f'"{AT}.sensor.detection_probability.factor" = [1.0, 1.3]\n'
    sweep += '"scene.sensor.detection_probability" = [0.7, 0.8]'
    (message,) = said_of(
        ("detection_probability = 0.9", "detection_probability = 0.7"), (SWEEP, sweep)
    )
    assert message.startswith(
        f'fog.toml:31: sweep."{AT}.sensor.detection_probability.factor" = 1.3: '
        "does not go with scene.sensor.detection_probability = 0.8: "
    )
    assert "makes it 1.04, which must lie in [0, 1]" in message
