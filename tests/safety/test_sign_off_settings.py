"""Whatever bears on safety voids a sign-off when it changes, and is named."""

from dataclasses import replace
from fnmatch import fnmatchcase
from typing import Any

import pytest
from settings_damage import Field, fields
from sign_off_builders import Office, changed, demo_work, office, signed, verdict

from pitchsweep.configs.job_model import Job
from pitchsweep.configs.safety_settings import (
    NOT_BOUND,
    Change,
    bound_settings,
    changes,
    is_bound,
    settings_sha256,
)
from pitchsweep.safety.sign_off_judging import why_settings_changed
from pitchsweep.safety.sign_off_store import Kept

WORK = demo_work()


@pytest.fixture(scope="module")
def at(tmp_path_factory: pytest.TempPathFactory) -> Office:
    return office(tmp_path_factory.mktemp("settings"))


@pytest.fixture(scope="module")
def kept(at: Office) -> Kept:
    return signed(at, WORK)


def other_value(value: Any) -> Any:
    """Another value of the same kind."""
    if isinstance(value, bool):
        return not value
    if isinstance(value, int | float):
        return value + 1
    if isinstance(value, str):
        return value + "x"
    if isinstance(value, tuple):
        return (*value, value[-1]) if value else ("new",)
    return "was empty" if value is None else None


def scalar_paths(model: Any, path: tuple[str, ...] = ()) -> list[tuple[str, ...]]:
    """The path of every leaf of a settings object, through models and dicts."""
    found: list[tuple[str, ...]] = []
    items = model.items() if isinstance(model, dict) else dict(model).items()
    for key, value in items:
        if hasattr(value, "model_fields_set") or (isinstance(value, dict) and value):
            found += scalar_paths(value, (*path, key))
        else:
            found.append((*path, key))
    return found


def with_other(model: Any, path: tuple[str, ...]) -> Any:
    """A copy of ``model`` with the leaf at ``path`` changed, nothing validated."""
    key, *rest = path
    inner = model[key] if isinstance(model, dict) else getattr(model, key)
    new = with_other(inner, tuple(rest)) if rest else other_value(inner)
    if isinstance(model, dict):
        return {**model, key: new}
    return model.model_copy(update={key: new})


def blocks() -> list[tuple[str, tuple[str, ...]]]:
    job = WORK.job
    return [
        (block, path)
        for block in ("bench", "part", "recipe")
        for path in scalar_paths(getattr(job, block))
    ]


def test_there_are_many_settings_and_most_are_bound() -> None:
    paths = [".".join((block, *path)) for block, path in blocks()]
    assert len(paths) > 100
    assert sum(map(is_bound, paths)) > 60
    assert set(bound_settings(WORK.job, WORK.checklist)) >= {
        p for p in paths if is_bound(p) and "surfaces" not in p
    }


@pytest.mark.filterwarnings("ignore:Pydantic serializer warnings")
@pytest.mark.parametrize(
    ("block", "path"), blocks(), ids=[".".join((b, *p)) for b, p in blocks()]
)
def test_a_changed_setting_voids_and_is_named(
    kept: Kept, block: str, path: tuple[str, ...]
) -> None:
    job = WORK.job.model_copy(
        update={block: with_other(getattr(WORK.job, block), path)}
    )
    why = why_settings_changed(kept.record, replace(WORK, job=job))
    dotted = ".".join((block, *path))
    if is_bound(dotted):
        assert why is not None and f"since it was signed: {dotted}" in why
    else:
        assert why is None


def test_the_whole_verdict_names_the_setting(at: Office, kept: Kept) -> None:
    other = changed(WORK, recipe={"stop_deg": WORK.job.recipe.stop_deg + 1.0})
    why = verdict(at, kept, other)
    assert "recipe.stop_deg was 45.0, is 46.0" in why


def test_a_stronger_laser_is_named_with_its_power(at: Office, kept: Kept) -> None:
    lasers = {
        name: laser.model_copy(update={"power_mw": 2.5})
        for name, laser in WORK.job.bench.lasers.items()
    }
    why = verdict(at, kept, changed(WORK, bench={"lasers": lasers}))
    assert "bench.lasers.red.power_mw was 0.9, is 2.5" in why


def test_surfaces_added_removed_or_moved_void(at: Office, kept: Kept) -> None:
    enclosure = WORK.job.bench.enclosure
    assert enclosure is not None
    surfaces = enclosure.surfaces
    moved = surfaces[0].model_copy(update={"azimuth_to_deg": 1.25})
    for new in (surfaces[:-1], surfaces[::-1], (moved, *surfaces[1:])):
        other = enclosure.model_copy(update={"surfaces": new})
        why = verdict(at, kept, changed(WORK, bench={"enclosure": other}))
        assert "bench.enclosure.surfaces" in why
    assert "bench.enclosure" in verdict(
        at, kept, changed(WORK, bench={"enclosure": None})
    )


ITEMS_TRIED = ("power", "doubled-filter", "fire-alarm", "officer")


def checklist_paths() -> list[tuple[str, ...]]:
    """The head of the checklist, and items that between them state everything."""
    return [
        p
        for p in scalar_paths(WORK.checklist)
        if p[0] not in ("note", "signatures", "items")
        or (p[0] == "items" and p[1] in ITEMS_TRIED)
    ]


@pytest.mark.filterwarnings("ignore:Pydantic serializer warnings")
def test_every_kind_of_word_in_the_checklist_voids(kept: Kept) -> None:
    for path in checklist_paths():
        other = replace(WORK, checklist=with_other(WORK.checklist, path))
        why = why_settings_changed(kept.record, other)
        assert why is not None and "checklist." in why, path
    fewer = {"signatures": WORK.checklist.signatures[:1]}
    softer = WORK.checklist.model_copy(update=fewer)
    why = why_settings_changed(kept.record, replace(WORK, checklist=softer))
    assert why is not None and "checklist.signatures" in why


def test_notes_spelling_and_twin_change_nothing(at: Office, kept: Kept) -> None:
    twin = WORK.job.bench.twin
    assert twin is not None
    other = changed(
        WORK,
        bench={"note": "new", "twin": twin.model_copy(update={"seed": 5})},
        part={"note": "new", "tolerance": None},
        recipe={"note": "new", "coverage": 0.9},
    )
    assert verdict(at, kept, other) == ""


def test_what_is_not_bound_says_why_and_exists() -> None:
    known = [".".join((b, *p)) for b, p in blocks()] + ["checklist.note"]
    known += [f"{b}.{f}" for b, f in (("part", "certified"), ("bench", "drift.x"))]
    for pattern, reason in NOT_BOUND.items():
        assert reason and any(fnmatchcase(path, pattern) for path in known), pattern


@pytest.mark.parametrize(
    "path",
    [
        "bench.lasers.red.power_mw",
        "bench.emission.keep_alive_ms",
        "bench.enclosure.surfaces[3].acts_as",
        "bench.stage.direction",
        "bench.a_setting_of_tomorrow",
        "recipe.exposures_ms",
        "checklist.items.door.says",
    ],
)
def test_what_is_not_listed_is_bound(path: str) -> None:
    assert is_bound(path)


def test_the_fingerprint_is_of_meaning() -> None:
    one = bound_settings(WORK.job, WORK.checklist)
    again = Job.model_validate(WORK.job.model_dump())
    same = bound_settings(again, WORK.checklist)
    assert settings_sha256(same) == settings_sha256(one)
    assert settings_sha256({**one, "part.serial": "8"}) != settings_sha256(one)
    assert changes(one, one) == ()
    (change,) = changes({"a": 1.0}, {})
    assert str(change) == "a was 1.0, is nothing" and isinstance(change, Change)


def test_every_schema_field_of_a_bench_is_reached() -> None:
    """The schema and the projection agree on what there is."""
    free = {"note", "twin", "air", "drift", "reading_u_mm"}
    wanted = {str(field).split(".")[0].split("[")[0] for field in _top_fields()}
    paths = bound_settings(WORK.job, WORK.checklist)
    found = {p.split(".")[1] for p in paths if p.startswith("bench.")}
    assert wanted - free <= found


def _top_fields() -> list[Field]:
    return list(fields(type(WORK.job.bench)))
