"""Each mistake has one message with place, key, value, rule and remedy."""

import math

import pytest

from harness.study.mistakes import StudyError
from harness.study.study import load_study, study_from

NOISE = "noise_sd_m = 4.0"
DETECTION = "detection_probability = 0.9"
SPREADS = "start_position_sd_m = [8.0, 8.0]\nstart_velocity_sd_m_per_s = [1.0, 1.0]"
REGION = "region_m = [[-400.0, 400.0], [-400.0, 400.0]]"
PDA = 'kind = "pda"'
KINDS = (
    "nearest-neighbour, most-probable-hypothesis, pda, gaussian-mixture, pruned-mixture, "
    "runnalls-mixture, n-scan-mixture, unreduced-mixture, point-mass-grid, "
    "particle-filter, rao-blackwellised-particle-filter, known-association"
)
MOTIONS = (
    "nearly-constant-velocity, piecewise-constant-acceleration, nearly-constant-acceleration, "
    "singer, coordinated-turn, constant-turn"
)

CASES = {
    "unknown key": (
        (NOISE, "nose_sd_m = 4.0"),
        "19: scene.sensor.nose_sd_m = 4.0: is unknown; did you mean noise_sd_m?",
    ),
    "another unit": (
        (NOISE, "noise_sd_km = 0.004"),
        "19: scene.sensor.noise_sd_km = 0.004: is unknown: here this is stated in m; "
        "write noise_sd_m, in m",
    ),
    "no unit": (
        (NOISE, "noise_sd = 4.0"),
        "19: scene.sensor.noise_sd = 4.0: is unknown: here this is stated in m; "
        "write noise_sd_m, in m",
    ),
    "another unit of a compound": (
        ("acceleration_psd_m2_per_s3", "acceleration_psd_m_per_s2"),
        "11: scene.target.acceleration_psd_m_per_s2 = 0.05: is unknown: here this is stated in "
        "m2/s3; write acceleration_psd_m2_per_s3, in m2/s3",
    ),
    "an unknown table": (
        ("[gospa]", "[gopsa]"),
        "37: gopsa: is unknown; did you mean gospa?",
    ),
    "a key of another kind": (
        (PDA, PDA + "\nmerge_below = 3"),
        "26: strategies.pda.merge_below = 3: is unknown here: only kind = gaussian-mixture "
        "has it; choose that, or remove it",
    ),
    "a key of another table": (
        ("cutoff_m = 30.0\n", "cutoff_m = 30.0\ntrials = 5\n"),
        "39: gospa.trials = 5: is unknown here; move it to the top of the file",
    ),
    "a key like no other": (
        ("cutoff_m = 30.0\n", "cutoff_m = 30.0\nxyz = 5\n"),
        "39: gospa.xyz = 5: is unknown; keys here are cutoff_m, order",
    ),
    "a dotted key in quotes": (
        (PDA, PDA + '\n"ends.empty_scans" = 3'),
        '26: strategies.pda."ends.empty_scans" = 3: is unknown; '
        "write the dots of a key outside quotes",
    ),
    "true for a number": (
        (NOISE, "noise_sd_m = true"),
        "19: scene.sensor.noise_sd_m = true: must be a number, not true or false; "
        "give a positive number, in m",
    ),
    "a number in quotes": (
        (NOISE, 'noise_sd_m = "4.0"'),
        '19: scene.sensor.noise_sd_m = "4.0": must be a number, not text; write it without quotes',
    ),
    "a number with its unit": (
        (NOISE, 'noise_sd_m = "4 m"'),
        '19: scene.sensor.noise_sd_m = "4 m": must be a number, not text; '
        "give a positive number, in m",
    ),
    "a date for a number": (
        (NOISE, "noise_sd_m = 2001-02-03"),
        "19: scene.sensor.noise_sd_m = 2001-02-03: must be a number; give a positive number, in m",
    ),
    "a negative number": (
        (NOISE, "noise_sd_m = -4"),
        "19: scene.sensor.noise_sd_m = -4: must be above 0; give a positive number, in m",
    ),
    "a negative density": (
        ("= 2e-5", "= -2e-5"),
        "21: scene.sensor.clutter_density_per_m2 = -2e-05: must be at least 0; "
        "give 0 or a positive number, per m2",
    ),
    "infinity": (
        (NOISE, "noise_sd_m = inf"),
        "19: scene.sensor.noise_sd_m = inf: must be finite; give a positive number, in m",
    ),
    "not a number": (
        (NOISE, "noise_sd_m = nan"),
        "19: scene.sensor.noise_sd_m = nan: must be finite; give a positive number, in m",
    ),
    "a whole number beyond all floating-point ones": (
        (NOISE, "noise_sd_m = 1" + "0" * 400),
        f"19: scene.sensor.noise_sd_m = 1{'0' * 55} ...: must be finite; "
        "give a positive number, in m",
    ),
    "a probability above 1": (
        (DETECTION, "detection_probability = 1.7"),
        "20: scene.sensor.detection_probability = 1.7: must lie in [0, 1]; give a probability",
    ),
    "a probability below 0": (
        (DETECTION, "detection_probability = -0.1"),
        "20: scene.sensor.detection_probability = -0.1: must lie in [0, 1]; give a probability",
    ),
    "a probability in percent": (
        (DETECTION, "detection_probability = 90"),
        "20: scene.sensor.detection_probability = 90: must lie in [0, 1]; "
        "give a probability, 0.9 for 90 %",
    ),
    "a gate that holds nothing": (
        (PDA, PDA + "\ngate_probability = 0"),
        "26: strategies.pda.gate_probability = 0: must lie in (0, 1]; give a probability",
    ),
    "a seed below 0": (
        ("seed = 12", "seed = -1"),
        "2: seed = -1: must be at least 0; give a whole number",
    ),
    "a seed beyond 63 bits": (
        ("seed = 12", f"seed = {2**63}"),
        f"2: seed = {2**63}: must be at most {2**63 - 1}; give a whole number",
    ),
    "a fractional seed": (
        ("seed = 12", "seed = 12.0"),
        "2: seed = 12.0: must be a whole number; write it without a decimal point or exponent",
    ),
    "no trials": (
        ("trials = 100", "trials = 0"),
        "3: trials = 0: must be at least 1; give a whole number",
    ),
    "too many components": (
        ('kind = "gaussian-mixture"', 'kind = "gaussian-mixture"\nmax_components = 20000'),
        "29: strategies.mixture.max_components = 20000: must be at most 10000; give a whole number",
    ),
    "pairs among too few components": (
        (PDA, 'kind = "runnalls-mixture"\nmax_components = 30\nmerge_among = 25'),
        "27: strategies.pda.merge_among = 25: is below max_components (30); "
        "make it as large or larger",
    ),
    "true for a whole number": (
        ("trials = 100", "trials = true"),
        "3: trials = true: must be a whole number, not true or false; give a whole number",
    ),
    "an empty title": (
        ('"Buoy tender in fog"', '""'),
        '1: title = "": must not be empty; write some words',
    ),
    "a number for text": (
        ('"Buoy tender in fog"', "5"),
        "1: title = 5: must be text; put it in quotes",
    ),
    "an unknown kind": (
        (PDA, 'kind = "pdas"'),
        f'25: strategies.pda.kind = "pdas": is unknown; did you mean pda? there are {KINDS}',
    ),
    "a kind like no other": (
        (PDA, "kind = 7"),
        f"25: strategies.pda.kind = 7: is unknown; there are {KINDS}",
    ),
    "an unknown motion": (
        ('"nearly-constant-velocity"', '"constant-velocity"'),
        '10: scene.target.motion = "constant-velocity": is unknown; '
        f"did you mean nearly-constant-velocity? there are {MOTIONS}",
    ),
    "a missing kind": (
        (PDA + "\n", ""),
        f"24: strategies.pda.kind: is missing; give kind, one of {KINDS}",
    ),
    "a misspelt kind": (
        (PDA, 'knd = "pda"'),
        '25: strategies.pda.knd = "pda": is unknown; did you mean kind?',
    ),
    "an unknown choice": (
        ('kind = "gaussian-mixture"', 'kind = "gaussian-mixture"\nestimate = "men"'),
        '29: strategies.mixture.estimate = "men": must be mean or heaviest; did you mean mean?',
    ),
    "a missing key": (
        ("scans = 30\n", ""),
        "5: scene.scans: is missing; give it, or scan_times_s in place of scans and "
        "scan_interval_s",
    ),
    "a missing key of the whole": (
        ("seed = 12\n", ""),
        " seed: is missing; add it: start of all random numbers",
    ),
    "a missing table": (
        ("[gospa]\ncutoff_m = 30.0\n", ""),
        " gospa: is missing; add the table [gospa]: settings of the GOSPA metric",
    ),
    "a value for a table": (
        (PDA, PDA + "\nends = 3"),
        "26: strategies.pda.ends = 3: must be a table; give its keys under a [table] or in { }",
    ),
    "a number for a list": (
        ("start_position_sd_m = [8.0, 8.0]", "start_position_sd_m = 8.0"),
        "14: scene.target.start_position_sd_m = 8.0: must be a list of numbers; "
        "write it as [..., ...]",
    ),
    "a wrong entry": (
        ("start_position_sd_m = [8.0, 8.0]", "start_position_sd_m = [\n8.0,\n-8.0]"),
        "16: scene.target.start_position_sd_m[1] = -8.0: must be above 0; "
        "give a positive number, in m",
    ),
    "a list of the wrong length": (
        ("start_position_sd_m = [8.0, 8.0]", "start_position_sd_m = [8.0]"),
        "14: scene.target.start_position_sd_m = [8.0]: must have as many entries as "
        "start_position_m, which has 2; give one for each axis",
    ),
    "a flat region": (
        (REGION, "region_m = [-400.0, 400.0]"),
        "22: scene.sensor.region_m[0] = -400.0: must be a list of numbers; write it as [..., ...]",
    ),
    "an interval of one end": (
        (REGION, "region_m = [[-400.0], [-400.0, 400.0]]"),
        "22: scene.sensor.region_m[0] = [-400.0]: must have 2 entries; give 2 numbers",
    ),
    "an interval of three ends": (
        (REGION, "region_m = [[-400.0, 400.0], [-400.0, 0.0, 400.0]]"),
        "22: scene.sensor.region_m[1] = [-400.0, 0.0, 400.0]: must have 2 entries; give 2 numbers",
    ),
    "an interval that runs backwards": (
        (REGION, "region_m = [[-400.0, 400.0], [400.0, -400.0]]"),
        "22: scene.sensor.region_m[1] = [400.0, -400.0]: must run from a lower to a higher value "
        "in m; swap its ends",
    ),
    "no region": (
        (REGION, "region_m = []"),
        "22: scene.sensor.region_m = []: is empty; give at least one value",
    ),
    "a density of other axes": (
        ("clutter_density_per_m2", "clutter_density_per_m3"),
        "21: scene.sensor.clutter_density_per_m3 = 2e-05: does not fit the number of axes of "
        "region_m, which is 2; give clutter_density_per_m2 or clutter_per_scan",
    ),
    "clutter stated twice": (
        (NOISE, NOISE + "\nclutter_per_scan = 3"),
        "22: scene.sensor.clutter_density_per_m2 = 2e-05: says the same as clutter_per_scan; "
        "keep one of them",
    ),
    "no clutter stated": (
        ("clutter_density_per_m2 = 2e-5\n", ""),
        "17: scene.sensor.clutter_per_scan: is missing; give one of clutter_density_per_m, "
        "clutter_density_per_m2, clutter_density_per_m3, clutter_per_scan, or the table clutter",
    ),
    "target and sensor of different axes": (
        (REGION, "region_m = [[-400.0, 400.0]]\nclutter_per_scan = 2"),
        ("clutter_density_per_m2 = 2e-5\n", ""),
        "12: scene.target.start_position_m = [40.0, -20.0]: has 2 entries but the sensor works "
        "along 1 axes; give the target and the sensor's place or region the same number",
    ),
    "a covariance of the wrong size": (
        (SPREADS, "start_covariance = [[1, 0], [0, 1]]"),
        "14: scene.target.start_covariance = [[1, 0], [0, 1]]: must have 4 rows of 4 numbers; "
        "order them as the state: positions, velocities, then what the motion adds",
    ),
    "a covariance beside standard deviations": (
        (SPREADS, SPREADS + "\nstart_covariance = [[1, 0], [0, 1]]"),
        "14: scene.target.start_position_sd_m = [8.0, 8.0]: says the same as start_covariance; "
        "keep one of them",
    ),
    "half of the standard deviations": (
        ("start_velocity_sd_m_per_s = [1.0, 1.0]\n", ""),
        "9: scene.target.start_velocity_sd_m_per_s: is missing; give start_velocity_sd_m_per_s, "
        "or start_covariance in place of all spreads",
    ),
    "two limits of loss": (
        ("for_scans = 4", "for_scans = 4\nerror_above_sigma = 5"),
        "36: track_loss.error_above_sigma = 5: stands beside error_above_m; keep one of the two",
    ),
    "no limit of loss": (
        ("error_above_m = 50.0\n", ""),
        "33: track_loss.error_above_m: is missing; give it or error_above_sigma",
    ),
    "a scoring window behind the end": (
        ("[gospa]", "[scoring]\nfrom_scan = 31\n[gospa]"),
        "38: scoring.from_scan = 31: must not exceed the 30 scans of the scene; "
        "give an earlier scan or more scans",
    ),
    "dots in a strategy's name": (
        ("[strategies.pda]", '[strategies."pda.1"]'),
        "24: strategies.\"pda.1\": is no name for a strategy; use letters, digits, blanks, '_', "
        "'+' and '-', at most 60, no dots or quotes",
    ),
    "no strategies": (
        (
            '[strategies.pda]\nkind = "pda"\n\n[strategies.mixture]\nkind = "gaussian-mixture"',
            "[strategies]",
        ),
        "24: strategies: is empty; name at least one",
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_a_mistake_has_one_message_with_its_place_rule_and_remedy(said_of, name):
    *edits, expected = CASES[name]
    assert said_of(*edits) == [f"fog.toml:{expected}"]


def correlated(correlation, asymmetry=0.0):
    """Covariance of four numbers with variances 4, 9, 1, 1, the last two correlated."""
    return (
        f"start_covariance = [[4, 0, 0, 0], [0, 9, 0, 0], [0, 0, 1, {correlation}], "
        f"[0, 0, {correlation + asymmetry}, 1]]"
    )


@pytest.mark.parametrize("correlation", [1.0, -1.0, 1.5, 1e30])
def test_a_correlation_of_one_or_more_is_not_positive_definite(said_of, correlation):
    """A 2 x 2 correlation matrix has the eigenvalues 1 + r and 1 - r."""
    (message,) = said_of((SPREADS, correlated(correlation)))
    assert "must be positive definite; lessen the numbers beside the diagonal" in message
    assert message.startswith("fog.toml:14: scene.target.start_covariance = [[4, 0, 0, 0]")


def test_a_variance_of_zero_is_not_positive_definite(said_of):
    (message,) = said_of((SPREADS, correlated(0.0).replace("[[4,", "[[0,")))
    assert "must be positive definite, but a number on its diagonal is not above 0" in message


def test_a_covariance_must_be_symmetric(said_of):
    (message,) = said_of((SPREADS, correlated(0.5, asymmetry=1e-6)))
    assert "must be symmetric; give the same number on both sides" in message


def test_correlations_below_one_and_rounding_of_symmetry_are_let_through(study_file):
    for covariance in (correlated(0.999999), correlated(-0.5, asymmetry=1e-14)):
        target = load_study(study_file((SPREADS, covariance))).record.scene.target
        assert math.isclose(target.start_spread()[1, 1], 9.0)


def test_many_mistakes_are_reported_at_once_in_the_order_of_their_lines(said_of):
    messages = said_of(
        ("seed = 12", "sed = 12"),
        (NOISE, "noise_sd_km = 1"),
        (DETECTION, "detection_probability = 2.0"),
        (PDA, 'kind = "pdas"'),
        ('"scene.sensor.noise_sd_m"', '"scene.sensor.noise_sd_mm"'),
        ("for_scans = 4", "for_scans = 0"),
    )
    places = [message.split(" = ")[0].split(": is")[0] for message in messages]
    assert places == [
        "fog.toml:2: sed",
        "fog.toml:19: scene.sensor.noise_sd_km",
        "fog.toml:20: scene.sensor.detection_probability",
        "fog.toml:25: strategies.pda.kind",
        'fog.toml:31: sweep."scene.sensor.noise_sd_mm"',
        "fog.toml:35: track_loss.for_scans",
    ]


def test_keys_that_are_no_text_are_mistakes_of_python_users():
    with pytest.raises(StudyError, match="must have text for a key"):
        study_from({1: 2})
