"""Strategies that ask for more memory than there is: told like any other mistake."""

import pytest

from filters.particles.cloud import bytes_per_particle, cloud_for
from harness.study import memory
from harness.study.memory import check_memory
from harness.study.mistakes import StudyError
from harness.study.study import load_study

MIXTURE = '[strategies.mixture]\nkind = "gaussian-mixture"\n'
CLOUD = '[strategies.cloud]\nkind = "particle-filter"\n'
HISTORIES = '[strategies.cloud]\nkind = "rao-blackwellised-particle-filter"\n'


@pytest.fixture
def one_megabyte(monkeypatch):
    monkeypatch.setattr(memory, "machine_memory", lambda: 1e6)


def mistakes_in(path):
    with pytest.raises(StudyError) as caught:
        check_memory(load_study(path))
    return caught.value.mistakes


def line_of(path, start):
    return 1 + [line.startswith(start) for line in path.read_text().split("\n")].index(True)


@pytest.mark.usefixtures("one_megabyte")
def test_particles_beyond_memory_are_told_with_place_and_remedy(study_file):
    """States of four numbers and measurements of two: 15 numbers of 8 bytes a particle."""
    path = study_file((MIXTURE, CLOUD + "particles = 10_000\n"))
    (mistake,) = mistakes_in(path)
    assert str(mistake) == (
        f"{path}:{line_of(path, 'particles')}: strategies.cloud.particles = 10000: needs 0.0012 GB "
        "of memory, and this machine has 0.001; take at most 8,300"
    )


@pytest.mark.usefixtures("one_megabyte")
def test_as_many_particles_as_the_remedy_says_are_taken(study_file):
    check_memory(load_study(study_file((MIXTURE, CLOUD + "particles = 8_300\n"))))


@pytest.mark.usefixtures("one_megabyte")
@pytest.mark.parametrize("table", [CLOUD, HISTORIES])
def test_swept_particles_are_told_at_their_sweep(study_file, table):
    values = '[sweep]\n"strategies.cloud.particles" = [100, 9_000, 20_000]\n'
    path = study_file((MIXTURE, table), ("[sweep]\n", values))
    key, line = "strategies.cloud.particles", line_of(path, '"strategies.cloud')
    found = [(one.line, one.key, one.value) for one in mistakes_in(path)]
    assert found == [(line, key, "9000"), (line, key, "20000")]


def test_a_particle_takes_as_much_as_is_reckoned_for_it():
    few, many = (sum(part.nbytes for part in cloud_for(4, 2, count, 30)) for count in (10, 110))
    assert many - few == 100 * bytes_per_particle(4, 2)


@pytest.mark.usefixtures("one_megabyte")
def test_clutter_beyond_memory_is_told_and_its_number_never_drawn(study_file):
    path = study_file(("clutter_density_per_m2 = 2e-5", "clutter_per_scan = 1e12"))
    (mistake,) = mistakes_in(path)
    assert f"{path}:{line_of(path, '[scene.sensor]')}: scene.sensor: draws 1e+12 false" in str(
        mistake
    )


def test_numbers_beyond_reckoning_are_mistakes(study_file):
    with pytest.raises(StudyError, match=r"noise_sd_m = 1e\+308: is beyond 1e\+30 in size"):
        load_study(study_file(("noise_sd_m = 4.0", "noise_sd_m = 1e308")))
