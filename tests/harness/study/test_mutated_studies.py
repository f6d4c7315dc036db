"""Whatever is done to a study, it loads or says what is wrong with it."""

import datetime
import tempfile
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st

from harness.study.mistakes import StudyError
from harness.study.study import Study, load_study, study_from

HARBOUR = Path(__file__).parents[3] / "studies" / "harbour_approach.toml"
DOCUMENT = load_study(HARBOUR).document
TEXT = HARBOUR.read_text(encoding="utf-8")

WORDS = st.sampled_from(
    [
        "kind",
        "motion",
        "factor",
        "assumes",
        "sensor",
        "pda",
        "position",
        "coordinated-turn",
        "noise_sd_m",
        "start_covariance",
        "scene.sensor.noise_sd_m",
        "strategies.pda.assumes.sensor.noise_sd_m.factor",
        "",
        "a.b",
        "ä\n",
    ]
) | st.text(max_size=4)
SCALARS = (
    WORDS
    | st.booleans()
    | st.integers()
    | st.sampled_from([0, 1, -1, 2**63, 10**400, 1e308, 5e-324, float("inf"), float("nan")])
    | st.floats()
    | st.just(datetime.date(2001, 2, 3))
)
VALUES = st.recursive(
    SCALARS,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(WORDS, inner, max_size=3),
    max_leaves=6,
)
MUTATIONS = st.lists(
    st.tuples(st.lists(st.integers(0, 30), min_size=1, max_size=4), WORDS | st.none(), VALUES),
    min_size=1,
    max_size=3,
)
SPLICES = st.lists(
    st.tuples(
        st.integers(0, len(TEXT)),
        st.integers(0, 30),
        st.sampled_from(['"', "'", "[", "]", "{", "}", "=", ".", "#", "\n", "\\", '"""', "[["])
        | st.text(max_size=3),
    ),
    min_size=1,
    max_size=3,
)


def mutated(value, way, key, replacement):
    """Return a document with one of its entries replaced, or with an entry more."""
    if not isinstance(value, dict | list) or not value:
        return replacement
    places = list(value) if isinstance(value, dict) else list(range(len(value)))
    place = places[way[0] % len(places)]
    copied = value.copy()
    if len(way) > 1:
        copied[place] = mutated(value[place], way[1:], key, replacement)
    elif isinstance(copied, dict) and key is not None:
        copied[key] = replacement
    else:
        copied[place] = replacement
    return copied


def mistakes_of(load):
    """Return what loading a study comes to: its mistakes, none if it loads."""
    try:
        assert isinstance(load(), Study)
    except StudyError as error:
        said = str(error).splitlines()
        assert said
        assert all(line.strip() for line in said)
        return error.mistakes
    return ()


@settings(max_examples=200, deadline=None, derandomize=True)
@given(MUTATIONS)
def test_a_study_with_anything_in_any_place_loads_or_is_said_to_be_mistaken(mutations):
    document = DOCUMENT
    for way, key, replacement in mutations:
        document = mutated(document, way, key, replacement)
    assert all(
        mistake.rule and mistake.remedy for mistake in mistakes_of(lambda: study_from(document))
    )


@settings(max_examples=200, deadline=None, derandomize=True)
@given(SPLICES)
def test_a_file_with_anything_in_any_place_loads_or_is_said_to_be_mistaken(splices):
    text = TEXT
    for place, length, piece in splices:
        text = text[:place] + piece + text[place + length :]
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "spliced.toml"
        path.write_bytes(text.encode("utf-8", "surrogatepass"))
        mistakes = mistakes_of(lambda: load_study(path))
    lines = text.count("\n") + 1
    assert all(mistake.line is None or 1 <= mistake.line <= lines for mistake in mistakes)
