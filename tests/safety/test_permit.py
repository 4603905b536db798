"""Permits: windows, challenge, and the refusal of hardware."""

import pytest
from guard_builders import KEY, UTC_S, guard_config

from pitchsweep.safety.guard_config import config_as_mapping, config_from_mapping
from pitchsweep.safety.permit import (
    RehearsalPermit,
    answers_challenge,
    challenge_answer,
    permit_as_mapping,
    permit_from_mapping,
    why_permit_lapsed,
)

PERMIT = RehearsalPermit(KEY, UTC_S, UTC_S + 60.0)


def lapsed(utc_s: float, by_monotonic_s: float | None = None) -> bool:
    by = utc_s if by_monotonic_s is None else by_monotonic_s
    reason = why_permit_lapsed(PERMIT, utc_s=utc_s, utc_by_monotonic_s=by)
    return reason is not None


def test_a_permit_holds_within_its_window_only() -> None:
    assert lapsed(UTC_S - 0.1)
    assert not lapsed(UTC_S)
    assert not lapsed(UTC_S + 59.9)
    assert lapsed(UTC_S + 60.0)


def test_a_clock_set_back_does_not_lengthen_a_permit() -> None:
    assert lapsed(UTC_S + 1.0, by_monotonic_s=UTC_S + 61.0)
    assert lapsed(UTC_S - 3600.0, by_monotonic_s=UTC_S + 1.0)


def test_a_clock_set_forward_ends_a_permit() -> None:
    assert lapsed(UTC_S + 61.0, by_monotonic_s=UTC_S + 1.0)


def test_nan_times_are_outside_every_window() -> None:
    assert lapsed(float("nan"))


def test_the_challenge_is_hmac_sha256_as_published() -> None:
    """RFC 4231, test case 1."""
    key, data = b"\x0b" * 20, b"Hi There"
    assert challenge_answer(key, data).hex() == (
        "b0344c61d8db38535ca8afceaf0bf12b881dc200c9833da726e9376c2e32cff7"
    )


def test_only_the_key_answers_the_challenge() -> None:
    nonce = b"n" * 16
    assert answers_challenge(PERMIT, nonce, challenge_answer(KEY, nonce))
    assert not answers_challenge(PERMIT, nonce, challenge_answer(KEY, b"m" * 16))
    assert not answers_challenge(PERMIT, nonce, challenge_answer(b"k" * 32, nonce))
    assert not answers_challenge(PERMIT, nonce, b"")


def test_a_permit_does_not_show_its_key() -> None:
    assert KEY.hex() not in repr(PERMIT) and repr(KEY) not in repr(PERMIT)


def test_a_permit_survives_its_mapping() -> None:
    assert permit_from_mapping(permit_as_mapping(PERMIT)) == PERMIT


@pytest.mark.parametrize(
    "change",
    [
        {"kind": "unattended"},
        {"kind": None},
        {"key": "00"},
        {"key": 5},
        {"key": "zz"},
        {"valid_from_utc_s": None},
        {"valid_until_utc_s": UTC_S - 1.0},
        {"valid_until_utc_s": float("inf")},
    ],
)
def test_any_other_permit_is_refused(change: dict[str, object]) -> None:
    with pytest.raises(ValueError):
        permit_from_mapping({**permit_as_mapping(PERMIT), **change})


def test_the_configuration_survives_its_mapping() -> None:
    config = guard_config()
    assert config_from_mapping(config_as_mapping(config)) == config


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("heartbeat_limit_s", 5.0),
        ("heartbeat_limit_s", float("nan")),
        ("tick_s", 0.1),
        ("tick_limit_s", 1.0),
        ("resumed", 0),
        ("run", ""),
        ("unit", None),
        ("unit", {"port": "x"}),
        ("permitted", {"steps": [[1, 2.0], [1, 3.0]]}),
        ("permitted", {"steps": [[1]]}),
        ("permitted", {"steps": {"1": 2.0}}),
    ],
)
def test_a_wrong_configuration_is_refused(key: str, value: object) -> None:
    with pytest.raises(ValueError):
        config_from_mapping({**config_as_mapping(guard_config()), key: value})


def test_a_keep_alive_beyond_250_ms_is_refused() -> None:
    values = config_as_mapping(guard_config())
    unit = values["unit"]
    assert isinstance(unit, dict)
    unit["keep_alive_ms"] = 251
    with pytest.raises(ValueError, match="keep_alive_ms = 251"):
        config_from_mapping(values)
