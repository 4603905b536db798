"""Whatever is written is read back, however the bytes are cut."""

from hypothesis import given
from hypothesis import strategies as st

from pitchsweep.drivers.dialect import Answer, LineReader, Nonsense
from pitchsweep.drivers.dialect_files import shipped_dialect

STAGE = shipped_dialect("rotary-line")
UNIT = shipped_dialect("emission-line")

numbers = st.integers(0, 99999)
places = st.fixed_dictionaries(
    {
        "angle_deg": st.integers(-4_000_000, 4_000_000).map(lambda n: n / 10000),
        "motion": st.sampled_from(["RESTING", "TURNING", "STALLED"]),
        "zero": st.sampled_from(["ZERO-KNOWN", "ZERO-LOST"]),
    }
)
names = st.from_regex(r"[!-~]([ -~]{0,40}[!-~])?", fullmatch=True)


@given(st.lists(st.tuples(numbers, places), max_size=5), st.data())
def test_places_survive_any_cutting(
    answers: list[tuple[int, dict[str, object]]], data: st.DataObject
) -> None:
    sent = b"".join(STAGE.encode_answer("place", f, n) for n, f in answers)
    cuts = sorted(data.draw(st.lists(st.integers(0, len(sent)), max_size=6)))
    reader = LineReader(STAGE)
    pieces = zip([0, *cuts], [*cuts, len(sent)], strict=True)
    read = [event for a, b in pieces for event in reader.feed(sent[a:b])]
    assert read == [Answer("place", f, n) for n, f in answers]


@given(numbers, names)
def test_names_survive(number: int, name: str) -> None:
    line = STAGE.encode_answer("named", {"identity": name}, number)
    expected = Answer("named", {"identity": name}, number)
    assert LineReader(STAGE).feed(line) == [expected]


@given(numbers, st.binary(min_size=1, max_size=32))
def test_digests_survive(number: int, digest: bytes) -> None:
    line = UNIT.encode_answer("proof", {"digest": digest}, number)
    assert LineReader(UNIT).feed(line) == [Answer("proof", {"digest": digest}, number)]


@given(st.lists(st.binary(max_size=300), max_size=8))
def test_any_bytes_give_events_and_bounded_memory(pieces: list[bytes]) -> None:
    reader = LineReader(STAGE)
    for piece in pieces:
        for event in reader.feed(piece):
            assert isinstance(event, Answer | Nonsense)
        assert reader.held_bytes <= STAGE.longest_bytes
