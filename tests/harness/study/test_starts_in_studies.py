"""What a study may say of how a strategy starts."""

from harness.study.study import load_study

ONE = 'kind = "pda"\nstart = { kind = "one-point", velocity_sd_m_per_s = 5.0 }'
PDA = ('kind = "pda"', ONE)
SWEEP = '"scene.sensor.noise_sd_m" = [2.0, 4.0]'
POSITION = """\
kind = "position"
noise_sd_m = 4.0
detection_probability = 0.9
clutter_density_per_m2 = 2e-5
region_m = [[-400.0, 400.0], [-400.0, 400.0]]"""
BEARING = """\
kind = "bearing"
noise_sd_bearing_deg = 4.0
detection_probability = 0.9
clutter_per_scan = 2.0"""


def test_a_strategy_starts_from_the_prior_unless_the_study_says_otherwise(study_file):
    started, other = load_study(study_file(PDA)).conditions[0].cases
    assert started.strategy.start.velocity_sd_m_per_s == 5.0
    assert other.strategy.start.kind == "prior"


def test_what_a_start_assumes_can_be_swept(study_file):
    sweep = '"strategies.pda.start.velocity_sd_m_per_s" = [1.0, 9.0]'
    study = load_study(study_file(PDA, (SWEEP, sweep)))
    starts = [condition.cases[0].strategy.start for condition in study.conditions]
    assert [start.velocity_sd_m_per_s for start in starts] == [1.0, 9.0]


def test_a_start_needs_detections_that_fix_a_position(said_of):
    swept = '"scene.sensor.noise_sd_bearing_deg" = [1.0, 2.0]'
    assert said_of(PDA, (POSITION, BEARING), (SWEEP, swept)) == [
        'fog.toml:25: strategies.pda.start.kind = "one-point": takes detections for positions, '
        "but those of 'bearing' are not converted into any; "
        "leave start out: the track then starts from the prior"
    ]


def test_a_grid_starts_from_the_prior_alone(said_of):
    grid = ONE.replace('"pda"', '"point-mass-grid"')
    assert said_of(('kind = "pda"', grid))[-1] == (
        'fog.toml:26: strategies.pda.start.kind = "one-point": is not for a grid; leave start out'
    )


def test_a_key_of_the_other_start_is_unknown_here(said_of):
    wrong = ONE.replace("one-point", "two-point")
    assert said_of(('kind = "pda"', wrong)) == [
        "fog.toml:26: strategies.pda.start.fastest_m_per_s: is missing; "
        "add it: greatest speed of a target, m/s: it bounds the way between both but for noise",
        "fog.toml:26: strategies.pda.start.velocity_sd_m_per_s = 5.0: is unknown here: "
        "only kind = one-point has it; choose that, or remove it",
    ]
