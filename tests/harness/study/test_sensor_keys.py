"""Keys of sensors, detection laws, clutter maps, paths and unmodelled truth: what is said of them.

The study's sensor is replaced by one of range and bearing; lines count from its table at 17.
"""

import pytest

from harness.study.study import load_study

SENSOR = """\
kind = "position"
noise_sd_m = 4.0
detection_probability = 0.9
clutter_density_per_m2 = 2e-5
region_m = [[-400.0, 400.0], [-400.0, 400.0]]
"""
POLAR = """\
kind = "range-bearing"
noise_sd_range_m = 4.0
noise_sd_bearing_deg = 1.0
region_range_m = [0.0, 600.0]
"""
BY_KEYS = "detection_probability = 0.9\nclutter_per_scan = 3.0\n"
SWEEP = '"scene.sensor.noise_sd_m" = [2.0, 4.0]'
NOISE_SWEEP = '"scene.sensor.noise_sd_range_m" = [2.0, 4.0]'
PDA = 'kind = "pda"'
DETECTION = "scene.sensor.detection"
CLUTTER = "scene.sensor.clutter"
RADAR = """\
[scene.sensor.detection]
kind = "swerling-1"
snr_db = 16.0
reference_range_m = 400.0
false_alarm_probability = 1e-4
resolution_cell = [10.0, 2.0]
"""
CONSTANT = '[scene.sensor.detection]\nkind = "constant"\nprobability = 0.9\n'
TABLE = '[scene.sensor.detection]\nkind = "range-table"\nprobability_over_range = [[0, 0.9]]\n'
PATCHES = """\
[scene.sensor.clutter]
kind = "patches"
expected_number = 2.0
[[scene.sensor.clutter.patches]]
centre = [300.0, 20.0]
sd = [30.0, 5.0]
expected_number = 4.0
"""
UNMODELLED = "\n[scene.unmodelled]\n"
LEGS = '\n[[scene.legs]]\nkind = "straight"\nduration_s = 20.0\n[[scene.legs]]\n'


@pytest.fixture
def said(said_of):
    """Return the messages about a study with such a sensor, lines counted from its kind."""

    def messages(sensor, *edits):
        replaced = (SENSOR, POLAR + sensor)
        found = said_of(replaced, (SWEEP, NOISE_SWEEP), *edits)
        return [message.removeprefix("fog.toml:") for message in found]

    return messages


@pytest.fixture
def scene_of(study_file):
    def load(sensor, *edits):
        path = study_file((SENSOR, POLAR + sensor), (SWEEP, NOISE_SWEEP), *edits)
        return load_study(path).conditions[0].rules.scene

    return load


MISTAKES = {
    "no detection": (
        "clutter_per_scan = 3.0\n",
        "17: scene.sensor.detection_probability: is missing; give it or the table detection",
    ),
    "two detections": (
        BY_KEYS + CONSTANT,
        "22: scene.sensor.detection_probability = 0.9: says the same as detection; "
        "keep one of them",
    ),
    "an unknown law": (
        BY_KEYS.replace("detection_probability = 0.9\n", "") + CONSTANT.replace("const", "cnst"),
        f'24: {DETECTION}.kind = "cnstant": is unknown; did you mean constant? '
        "there are constant, range-table, swerling-0, swerling-1",
    ),
    "a ratio without its range": (
        RADAR.replace("reference_range_m = 400.0\n", ""),
        f"22: {DETECTION}.reference_range_m: is missing; add it: "
        "range at which the signal-to-noise ratio is stated, m",
    ),
    "a ratio of another unit": (
        RADAR.replace("snr_db", "snr"),
        f"24: {DETECTION}.snr = 16.0: is unknown: here this is stated in dB; write snr_db, in dB",
    ),
    "false alarms in every cell": (
        RADAR.replace("1e-4", "1.0"),
        f"26: {DETECTION}.false_alarm_probability = 1.0: must lie in (0, 1); give a probability",
    ),
    "a cell of the wrong size": (
        RADAR.replace("[10.0, 2.0]", "[10.0]"),
        f"27: {DETECTION}.resolution_cell = [10.0]: must have 2 entries; "
        "give one for each component of the measurement",
    ),
    "clutter beside false alarms": (
        "clutter_per_scan = 3.0\n" + RADAR,
        "22: scene.sensor.clutter_per_scan = 3.0: stands beside "
        "detection.false_alarm_probability, which sets the clutter too; remove it",
    ),
    "a cell without false alarms": (
        "clutter_per_scan = 3.0\n" + CONSTANT + "resolution_cell = [1.0, 1.0]\n",
        f"23: {DETECTION}.false_alarm_probability: is missing; "
        "give it beside resolution_cell, or remove that",
    ),
    "a blind sector that runs backwards": (
        RADAR + "blind_sectors_deg = [[10, 20], [60.0, 30.0]]\n",
        f"28: {DETECTION}.blind_sectors_deg[1] = [60.0, 30.0]: must run from a lower to a higher "
        "value in degrees; swap its ends",
    ),
    "no blind sectors": (
        RADAR + "blind_sectors_deg = []\n",
        f"28: {DETECTION}.blind_sectors_deg = []: is empty; give at least one value",
    ),
    "a table that does not grow": (
        "clutter_per_scan = 3.0\n" + TABLE.replace("[[0, 0.9]]", "[[0, 0.9], [9, 0.5], [9, 0.4]]"),
        f"25: {DETECTION}.probability_over_range[2] = [9, 0.4]: must have a longer range than the "
        "row before; order its rows",
    ),
    "a table of nothing": (
        "clutter_per_scan = 3.0\n" + TABLE.replace("[[0, 0.9]]", "[]"),
        f"25: {DETECTION}.probability_over_range = []: is empty; give at least one value",
    ),
    "a table with a probability above 1": (
        "clutter_per_scan = 3.0\n" + TABLE.replace("0.9]]", "9]]"),
        f"25: {DETECTION}.probability_over_range[0][1] = 9: must lie in [0, 1]; "
        "give a probability, 0.09 for 9 %",
    ),
    "noise that vanishes at a range": (
        BY_KEYS + "noise_factor_over_range = [[0.0, 1.0], [100.0, 0.0]]\n",
        "24: scene.sensor.noise_factor_over_range[1][1] = 0.0: must be above 0; "
        "give a positive number",
    ),
    "a table of noise that does not grow": (
        BY_KEYS + "noise_factor_over_range = [[200.0, 1.0], [100.0, 2.0]]\n",
        "24: scene.sensor.noise_factor_over_range[1] = [100.0, 2.0]: must have a longer range "
        "than the row before; order its rows",
    ),
    "clutter stated as key and as map": (
        BY_KEYS + '[scene.sensor.clutter]\nkind = "uniform"\nexpected_number = 3.0\n',
        "23: scene.sensor.clutter_per_scan = 3.0: says the same as clutter; keep one of them",
    ),
    "a map of no clutter": (
        'detection_probability = 0.9\n[scene.sensor.clutter]\nkind = "uniform"\n',
        f"23: {CLUTTER}.expected_number: is missing; give it or density",
    ),
    "a patch of another size": (
        "detection_probability = 0.9\n" + PATCHES.replace("[300.0, 20.0]", "[300.0]"),
        f"27: {CLUTTER}.patches[0].centre = [300.0]: must have 2 entries; "
        "give one for each component of the measurement",
    ),
    "a patch outside": (
        "detection_probability = 0.9\n" + PATCHES.replace("300.0,", "700.0,"),
        f"27: {CLUTTER}.patches[0].centre = [700.0, 20.0]: lies outside the sensor's region; "
        "move it inside",
    ),
    "a patch all around": (
        "detection_probability = 0.9\n" + PATCHES.replace(", 5.0]", ", 90.0]"),
        f"28: {CLUTTER}.patches[0].sd = [30.0, 90.0]: must not exceed 60 degrees along an angle; "
        "lessen it, or state the clutter as uniform",
    ),
    "a patch of no strength": (
        "detection_probability = 0.9\n" + PATCHES.replace("expected_number = 4.0\n", ""),
        f"26: {CLUTTER}.patches[0].expected_number: is missing; give it or peak_density",
    ),
    "no patches": (
        "detection_probability = 0.9\n" + PATCHES[: PATCHES.index("[[")] + "patches = []\n",
        f"26: {CLUTTER}.patches = []: is empty; give at least one value",
    ),
    "a place of other axes": (
        BY_KEYS + "position_m = [1.0, 2.0, 3.0]\n",
        "24: scene.sensor.position_m = [1.0, 2.0, 3.0]: has 3 entries but the sensor works along "
        "2 axes; give one for each axis",
    ),
    "two places": (
        BY_KEYS + "position_m = [1.0, 2.0]\nsites_m = [[0.0, 0.0]]\n",
        "24: scene.sensor.position_m = [1.0, 2.0]: says the same as sites_m; keep one of them",
    ),
    "no sites": (
        BY_KEYS + "sites_m = []\n",
        "24: scene.sensor.sites_m = []: is empty; give at least one value",
    ),
    "a site of other axes": (
        BY_KEYS + "sites_m = [[0.0, 0.0], [1.0]]\n",
        "24: scene.sensor.sites_m[1] = [1.0]: has 1 entries but the sensor works along 2 axes; "
        "give one for each axis",
    ),
    "a path of one point": (
        BY_KEYS + "[[scene.sensor.path]]\ntime_s = 0.0\nposition_m = [0.0, 0.0]\n",
        "24: scene.sensor.path = [{ time_s = 0.0, position_m = [0.0, 0.0] }]: "
        "must have at least 2 entries; it has 1",
    ),
    "a path that is too short": (
        BY_KEYS
        + "[[scene.sensor.path]]\ntime_s = 0.0\nposition_m = [0.0, 0.0]\n"
        + "[[scene.sensor.path]]\ntime_s = 57.0\nposition_m = [9.0, 0.0]\n",
        "24: scene.sensor.path = [{ time_s = 0.0, position_m = [0.0, 0.0] }, { time_s = 5 ...: "
        "must reach from the first scan, at 0 s, to the last, at 58 s; "
        "add a waypoint, or move the first or the last",
    ),
    "a path back in time": (
        BY_KEYS
        + "[[scene.sensor.path]]\ntime_s = 5.0\nposition_m = [0.0, 0.0]\n"
        + "[[scene.sensor.path]]\ntime_s = 5.0\nposition_m = [9.0, 0.0]\n",
        "28: scene.sensor.path[1].time_s = 5.0: must be later than that of the waypoint before; "
        "order the path by time",
    ),
    "a leg of no kind": (
        BY_KEYS + LEGS + "duration_s = 3.0\n",
        "28: scene.legs[1].kind: is missing; give kind, one of straight, turn, speed-change",
    ),
    "an unknown leg": (
        BY_KEYS + LEGS + 'kind = "trun"\nduration_s = 3.0\n',
        '29: scene.legs[1].kind = "trun": is unknown; did you mean turn? '
        "there are straight, turn, speed-change",
    ),
    "a turn of no rate": (
        BY_KEYS + LEGS + 'kind = "turn"\nduration_s = 3.0\n',
        "28: scene.legs[1].turn_rate_deg_per_s: is missing; give it or lateral_acceleration_g",
    ),
    "a turn of two rates": (
        BY_KEYS
        + LEGS
        + 'kind = "turn"\nduration_s = 3.0\nturn_rate_deg_per_s = 2\nlateral_acceleration_g = 1\n',
        "31: scene.legs[1].turn_rate_deg_per_s = 2: says the same as lateral_acceleration_g; "
        "keep one of them",
    ),
    "a leg without an end": (
        BY_KEYS + LEGS + 'kind = "straight"\nduration_s = 0.0\n',
        "30: scene.legs[1].duration_s = 0.0: must be above 0; give a positive number, in s",
    ),
    "a bias of another size": (
        BY_KEYS + UNMODELLED + "measurement_bias = [1.0]\n",
        "26: scene.unmodelled.measurement_bias = [1.0]: must have 2 entries; "
        "give one for each component of the measurement",
    ),
    "misses for ever": (
        BY_KEYS + UNMODELLED + "detection_persistence = 1.0\n",
        "26: scene.unmodelled.detection_persistence = 1.0: must lie in [0, 1); give a number",
    ),
    "a scatter of another size": (
        BY_KEYS
        + "\n[scene.unmodelled.persistent_clutter]\nexpected_number = 3\nshown_probability = 1\n"
        + "mean_lifetime_s = 9\nspread = [1.0]\n",
        "29: scene.unmodelled.persistent_clutter.spread = [1.0]: must have 2 entries; "
        "give one for each component of the measurement",
    ),
    "what is no part of it": (
        BY_KEYS + UNMODELLED + "noise_sd_range_m = 3.0\n",
        "26: scene.unmodelled.noise_sd_range_m = 3.0: is unknown here; move it to [scene.sensor]",
    ),
}


@pytest.mark.parametrize("name", MISTAKES)
def test_a_mistake_has_one_message_with_its_place_rule_and_remedy(said, name):
    sensor, expected = MISTAKES[name]
    assert said(sensor) == [expected]


SCANS = "scans = 30\nscan_interval_s = 2.0"


@pytest.mark.parametrize(
    ("scans", "expected"),
    [
        (
            "scans = 30\nscan_times_s = [0.0, 1.0]",
            "6: scene.scans = 30: says the same as scan_times_s; keep one of them",
        ),
        (
            "scan_times_s = [0.0, 1.0, 1.0]",
            "6: scene.scan_times_s[2] = 1.0: must be later than the one before; order the times",
        ),
        ("scan_times_s = []", "6: scene.scan_times_s = []: is empty; give at least one value"),
        (
            "scans = 30",
            "5: scene.scan_interval_s: is missing; give it, or scan_times_s in place of scans and "
            "scan_interval_s",
        ),
    ],
)
def test_scans_are_stated_in_one_way(said_of, scans, expected):
    assert said_of((SCANS, scans)) == [f"fog.toml:{expected}"]


def test_stated_scan_times_can_be_few_and_must_hold_the_scoring_window(study_file, said_of):
    study = load_study(study_file((SCANS, "scan_times_s = [0.0, 1.5, 7.0]")))
    assert study.conditions[0].rules.scene.scan_count == 3
    (message,) = said_of(
        (SCANS, "scan_times_s = [0.0, 1.5, 7.0]"), ("[gospa]", "[scoring]\nfrom_scan = 4\n[gospa]")
    )
    assert "must not exceed the 3 scans of the scene" in message


def test_elevations_beyond_the_poles_are_a_mistake(said_of):
    sensor = (
        'kind = "range-azimuth-elevation"\nnoise_sd_range_m = 4.0\nnoise_sd_azimuth_deg = 1.0\n'
        "noise_sd_elevation_deg = 1.0\nregion_range_m = [0.0, 600.0]\n"
        "region_elevation_deg = [-10.0, 95.0]\n"
    )
    (message,) = said_of((SENSOR, sensor + BY_KEYS), (SWEEP, NOISE_SWEEP))
    assert message == (
        "fog.toml:23: scene.sensor.region_elevation_deg = [-10.0, 95.0]: must lie within -90 and "
        "90 degrees; bring its ends in"
    )


def test_bearings_know_no_clutter_against_range(said_of):
    sensor = (
        'kind = "bearing"\nnoise_sd_bearing_deg = 1.0\ndetection_probability = 0.9\n'
        '[scene.sensor.clutter]\nkind = "range-table"\ndensity_over_range = [[0.0, 1e-3]]\n'
    )
    (message,) = said_of((SENSOR, sensor), (SWEEP, NOISE_SWEEP.replace("range_m", "bearing_deg")))
    assert message == (
        'fog.toml:22: scene.sensor.clutter.kind = "range-table": needs a range, which the sensor '
        "does not measure; choose another"
    )


def test_one_axis_has_neither_bearings_nor_turns(said_of):
    line = (
        ("start_position_m = [40.0, -20.0]", "start_position_m = [40.0]"),
        ("start_velocity_m_per_s = [3.0, 1.0]", "start_velocity_m_per_s = [3.0]"),
        ("start_position_sd_m = [8.0, 8.0]", "start_position_sd_m = [8.0]"),
        ("start_velocity_sd_m_per_s = [1.0, 1.0]", "start_velocity_sd_m_per_s = [1.0]"),
    )
    sensor = (
        'kind = "position"\nnoise_sd_m = 4.0\nclutter_per_scan = 2.0\nregion_m = [[-400, 400]]\n'
    )
    blind = CONSTANT + "blind_sectors_deg = [[0, 9]]\n"
    (message,) = said_of((SENSOR, sensor + blind), *line)
    assert "needs a plane, but the sensor works on one axis; remove it" in message
    turn = '\n[[scene.legs]]\nkind = "turn"\nduration_s = 9\nturn_rate_deg_per_s = 1\n'
    (message,) = said_of((SENSOR, sensor + "detection_probability = 1\n" + turn), *line)
    assert 'scene.legs[0].kind = "turn": needs two axes or more; choose straight' in message


# What can be said


def test_false_alarms_set_the_clutter_and_sweep_with_the_detection(study_file):
    sweep = '"scene.sensor.detection.false_alarm_probability" = [1e-6, 1e-3]'
    study = load_study(study_file((SENSOR, POLAR + RADAR), (SWEEP, sweep)))
    low, high = (condition.rules.scene.sensor for condition in study.conditions)
    cell = 10.0 * 2.0 * 3.141592653589793 / 180
    assert low.clutter_intensity() == pytest.approx(1e-6 / cell)
    assert high.clutter_intensity() == pytest.approx(1e-3 / cell)


def test_points_of_tables_legs_and_unmodelled_truth_can_be_swept(study_file):
    sweep = (
        '"scene.sensor.detection.probability_over_range.0.1" = [0.5, 0.6]\n'
        '"scene.legs.0.turn_rate_deg_per_s" = [1.0, 2.0]\n'
        '"scene.unmodelled.detection_persistence" = [0.0, 0.5]\n'
        '"scene.unmodelled.persistent_clutter.expected_number" = [1.0, 5.0]'
    )
    stated = TABLE + '\n[[scene.legs]]\nkind = "turn"\nduration_s = 9\nturn_rate_deg_per_s = 1\n'
    stated += (
        "[scene.unmodelled.persistent_clutter]\nexpected_number = 3\nshown_probability = 1\n"
        "mean_lifetime_s = 9\n"
    )
    study = load_study(
        study_file((SENSOR, POLAR + "clutter_per_scan = 3\n" + stated), (SWEEP, sweep))
    )
    last = study.conditions[-1].rules.scene
    assert len(study.conditions) == 16
    assert last.sensor.detection.probability_over_range == ((0.0, 0.6),)
    assert last.legs[0].turn_rate_deg_per_s == 2.0
    assert last.unmodelled.detection_persistence == 0.5
    assert last.unmodelled.persistent_clutter.expected_number == 5.0


# Assumptions


@pytest.fixture
def assumed_of(study_file):
    def load(sensor, assumes):
        path = study_file(
            (SENSOR, POLAR + sensor), (SWEEP, NOISE_SWEEP), (PDA, f"{PDA}\n{assumes}")
        )
        condition = load_study(path).conditions[0]
        return condition.rules.scene, condition.cases[0].assumed

    return load


def test_a_key_of_the_detection_law_may_be_assumed_and_the_rest_is_as_in_the_scene(assumed_of):
    scene, assumed = assumed_of(RADAR, "assumes.sensor.detection.snr_db = 13.0")
    assert assumed.sensor.detection == scene.sensor.detection.model_copy(update={"snr_db": 13.0})


def test_a_key_of_the_detection_law_may_be_multiplied(assumed_of):
    factor = "assumes.sensor.detection.false_alarm_probability.factor = 10"
    scene, assumed = assumed_of(RADAR, factor)
    assert assumed.sensor.clutter_intensity() == pytest.approx(
        10 * scene.sensor.clutter_intensity()
    )


def test_another_law_keeps_the_false_alarms_that_it_has_too(assumed_of):
    """A strategy that takes PD as constant goes on with the clutter of the scene's threshold."""
    scene, assumed = assumed_of(
        RADAR, 'assumes.sensor.detection.kind = "constant"\n'
        "assumes.sensor.detection.probability = 0.8"
    )  # fmt: skip
    assert assumed.sensor.detection.probability == 0.8
    assert assumed.sensor.clutter_intensity() == scene.sensor.clutter_intensity()


def test_a_constant_replaces_the_scenes_law_and_a_law_its_constant(assumed_of):
    _, assumed = assumed_of(
        TABLE + "blind_range_rate_m_per_s = 3.0\n[scene.sensor.clutter]\n"
        'kind = "uniform"\nexpected_number = 2\n',
        "assumes.sensor.detection_probability = 0.6",
    )
    assert assumed.sensor.detection is None
    assert assumed.sensor.detection_probability == 0.6
    _, assumed = assumed_of(
        BY_KEYS, 'assumes.sensor.detection = { kind = "constant", probability = 0.5 }'
    )
    assert assumed.sensor.detection_probability is None
    assert assumed.sensor.detection.probability == 0.5


def test_a_factor_of_a_table_multiplies_its_values_and_not_its_ranges(assumed_of):
    stated = (
        "detection_probability = 0.9\nnoise_factor_over_range = [[100, 1.0], [300, 3.0]]\n"
        '[scene.sensor.clutter]\nkind = "range-table"\n'
        "density_over_range = [[100.0, 1e-4], [300.0, 2e-5]]\n"
    )
    _, assumed = assumed_of(stated, "assumes.sensor.clutter.density_over_range.factor = 10")
    assert assumed.sensor.clutter.density_over_range == ((100.0, 1e-3), (300.0, 2e-4))
    _, assumed = assumed_of(stated, "assumes.sensor.noise_factor_over_range.factor = 0.5")
    assert assumed.sensor.noise_factor_over_range == ((100, 0.5), (300, 1.5))


def test_uniform_clutter_may_be_assumed_where_it_is_patchy(assumed_of):
    _, assumed = assumed_of(
        "detection_probability = 0.9\n" + PATCHES, "assumes.sensor.clutter_per_scan = 6.0"
    )
    assert assumed.sensor.clutter is None
    assert assumed.sensor.clutter_per_scan == 6.0


def test_another_place_may_be_assumed(assumed_of):
    moving = BY_KEYS + "position_m = [1, 2]\nvelocity_m_per_s = [3, 4]\n"
    _, assumed = assumed_of(moving, "assumes.sensor.position_m = [5, 6]")
    assert assumed.sensor.velocity_m_per_s == (3, 4)
    _, assumed = assumed_of(moving, "assumes.sensor.sites_m = [[5, 6]]")
    assert assumed.sensor.position_m is None
    assert assumed.sensor.velocity_m_per_s is None


def test_what_is_told_to_no_strategy_is_no_part_of_an_assumed_scene(assumed_of):
    stated = BY_KEYS + UNMODELLED + "measurement_bias = [5.0, 1.0]\n" + LEGS
    stated += 'kind = "straight"\nduration_s = 3\n'
    scene, assumed = assumed_of(stated, "assumes.sensor.detection_probability = 0.7")
    assert scene.legs is not None
    assert assumed.legs is None
    assert assumed.unmodelled.measurement_bias is None


AT = "strategies.pda.assumes"
WRONG_ASSUMPTIONS = {
    "unmodelled truth": (
        BY_KEYS,
        "assumes.unmodelled.measurement_bias = [1.0, 2.0]",
        f"{AT}.unmodelled: is told to no strategy; "
        "state it as scene.unmodelled, which is for the truth alone",
    ),
    "legs": (
        BY_KEYS,
        'assumes.legs = [{ kind = "straight", duration_s = 3 }]',
        f'{AT}.legs = [{{ kind = "straight", duration_s = 3 }}]: is told to no strategy; '
        "state it as scene.legs, which is for the truth alone",
    ),
    "unmodelled truth of the sensor": (
        BY_KEYS,
        "assumes.sensor.measurement_bias = [1.0, 2.0]",
        f"{AT}.sensor.measurement_bias = [1.0, 2.0]: is unknown here; move it to "
        "[scene.unmodelled]",
    ),
    "a misspelt key of the law": (
        RADAR,
        "assumes.sensor.detection.snr_dB = 12",
        f"{AT}.sensor.detection.snr_dB = 12: is unknown; did you mean snr_db?",
    ),
    "a key of another law": (
        RADAR,
        "assumes.sensor.detection.probability = 0.8",
        f"{AT}.sensor.detection.probability = 0.8: is unknown here: only kind = constant has it; "
        "choose that, or write false_alarm_probability",
    ),
    "a factor of a law": (
        RADAR,
        "assumes.sensor.detection.factor = 2",
        f"{AT}.sensor.detection.factor = 2: multiplies what is no number; give a value instead",
    ),
    "a factor out of its limits": (
        RADAR,
        "assumes.sensor.detection.false_alarm_probability.factor = 1e5",
        f"{AT}.sensor.detection.false_alarm_probability.factor = 100000.0: makes it 10.0, "
        "which must lie in (0, 1); give a probability, 0.1 for 10 %",
    ),
    "a factor beyond all floating-point numbers": (
        RADAR,
        f"assumes.sensor.detection.snr_db.factor = 1{'0' * 400}",
        f"{AT}.sensor.detection.snr_db.factor = 1{'0' * 55} ...: must be finite; give a number",
    ),
    "another clutter beside the scene's false alarms": (
        RADAR,
        "assumes.sensor.clutter_per_scan = 3.0",
        f"{AT}.sensor.clutter_per_scan = 3.0: stands beside detection.false_alarm_probability, "
        "which sets the clutter too; remove it",
    ),
    "no table": (
        RADAR,
        "assumes.sensor.detection = 0.8",
        f"{AT}.sensor.detection = 0.8: must be a table; name its keys: detection.KEY = value",
    ),
}


@pytest.mark.parametrize("name", WRONG_ASSUMPTIONS)
def test_a_mistake_in_an_assumption_is_named_where_it_is_assumed(said, name):
    sensor, assumes, expected = WRONG_ASSUMPTIONS[name]
    (message,) = said(sensor, (PDA, f"{PDA}\n{assumes}"))
    assert message.split(": ", 1)[1] == expected


def test_assumptions_of_a_law_can_be_swept(study_file):
    sweep = f'"{AT}.sensor.detection.false_alarm_probability.factor" = [0.1, 1.0]\n'
    sweep += f'"{AT}.sensor.detection.snr_db" = [10.0, 12.0]'
    study = load_study(study_file((SENSOR, POLAR + RADAR), (SWEEP, sweep)))
    told = [condition.cases[0].assumed.sensor.detection for condition in study.conditions]
    assert [law.snr_db for law in told] == [10.0, 12.0] * 2
    assert told[0].false_alarm_probability == pytest.approx(1e-5)
