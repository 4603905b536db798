"""Reads benches, parts, recipes and jobs from YAML files. This module opens files.

A place is a path or ``demo:NAME`` for a file that ships with the program. Names
inside a job file are resolved against that file, so all of it works from any folder.
"""

import difflib
import os
from collections.abc import Iterable
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path
from typing import Any, TypeVar

from pydantic import ValidationError

from pitchsweep.configs.allowed_values import allowed_keys, allowed_text
from pitchsweep.configs.answers_model import Answers
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.checklist_model import Checklist
from pitchsweep.configs.config_errors import Problem, SettingsRefused
from pitchsweep.configs.job_model import Job, JobFile
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.recipe_model import Recipe
from pitchsweep.configs.settings_base import Settings
from pitchsweep.configs.yaml_lines import KeyPath, YamlDocument, dotted, parse_yaml

Model = TypeVar("Model", bound=Settings)
Place = str | Path

DEMO = "demo:"
PARTS_OF_A_JOB = ("bench", "part", "recipe")
KINDS: dict[type[Settings], str] = {
    Job: "job",
    JobFile: "job",
    Bench: "bench",
    Part: "part",
    Recipe: "recipe",
    Checklist: "checklist",
}
"""What a file of each model is called; the word is also a key of its first block."""


@dataclass(frozen=True)
class LoadedJob:
    """A complete job and where it came from.

    ``source`` is what the user wrote; ``files`` holds the file read for each of job,
    bench, part and recipe (all the same file for a frozen job), and ``lot[0]`` and so
    on for each part of a lot.
    """

    job: Job
    source: str
    files: dict[str, Path]


def read_bench(place: Place) -> Bench:
    """The bench at ``place``. Raises SettingsRefused."""
    return read_settings(find(place, "benches"), Bench)


def read_part(place: Place) -> Part:
    """The part at ``place``. Raises SettingsRefused."""
    return read_settings(find(place, "parts"), Part)


def read_recipe(place: Place) -> Recipe:
    """The recipe at ``place``. Raises SettingsRefused."""
    return read_settings(find(place, "recipes"), Recipe)


def read_checklist(place: Place) -> Checklist:
    """The checklist at ``place``. Raises SettingsRefused."""
    return read_settings(find(place, "checklists"), Checklist)


def read_answers(path: Path) -> Answers:
    """The answers in the file at ``path``. Raises SettingsRefused."""
    return read_settings(path, Answers)


def read_job(place: Place) -> LoadedJob:
    """The job at ``place``: a job file, a frozen job, or ``demo:NAME``.

    Raises SettingsRefused naming file, line, key, value and what is allowed.
    """
    path = find(place, "jobs")
    document = read_document(path)
    if all(isinstance(document.value.get(k), dict) for k in PARTS_OF_A_JOB):
        job = settings_from(document, Job)
        return LoadedJob(job, str(place), dict.fromkeys(("job", *PARTS_OF_A_JOB), path))
    named = settings_from(document, JobFile)
    found = {k: _neighbour(document, path, (k,)) for k in ("bench", "recipe")}
    seated, files = _seated(document, path, named)
    # A lot that is all certified is refused by the job itself.
    open_ones = [part for part in seated if part.certified is None]
    part = (open_ones or seated)[0]
    found["part"] = files[seated.index(part)]
    if named.lot:
        found |= {f"lot[{index}]": file for index, file in enumerate(files)}
    blocks: dict[str, Any] = {
        "bench": read_settings(found["bench"], Bench),
        "part": part,
        "lot": tuple(seated) if named.lot else (),
        "recipe": read_settings(found["recipe"], Recipe),
    }
    head: dict[str, Any] = {
        "job": named.job,
        "note": named.note,
        "schedule": named.schedule,
    }
    job = _validated(document, {**head, **blocks}, Job)
    return LoadedJob(job, str(place), {"job": path, **found})


def shipped_names(kind: str) -> tuple[str, ...]:
    """Names of the shipped files of ``kind`` ("jobs", "benches", ...), sorted."""
    return tuple(sorted(p.stem for p in (_house() / kind).glob("*.yaml")))


def find(place: Place, kind: str) -> Path:
    """The path that ``place`` means; ``demo:NAME`` looks among the shipped ``kind``.

    Raises SettingsRefused when no shipped file has that name.
    """
    text = str(place)
    if not text.startswith(DEMO):
        return Path(place)
    name, names = text.removeprefix(DEMO), shipped_names(kind)
    if name in names:
        return _house() / kind / f"{name}.yaml"
    saying = f"no such name among the shipped {kind}; there are {', '.join(names)}"
    raise SettingsRefused([Problem(text, None, "", None, saying)])


def read_settings(path: Path, model: type[Model]) -> Model:
    """The settings in the file at ``path`` as ``model``. Raises SettingsRefused."""
    return settings_from(read_document(path), model)


def read_document(path: Path) -> YamlDocument:
    """The plain YAML in the file at ``path``. Raises SettingsRefused."""
    try:
        data = path.read_bytes()
    except (OSError, ValueError) as error:
        why = getattr(error, "strerror", None) or str(error)
        saying = f"cannot be read ({why}); give a YAML file or demo:NAME"
        raise SettingsRefused([Problem(str(path), None, "", None, saying)]) from None
    return parse_yaml(data, str(path))


def settings_from(document: YamlDocument, model: type[Model]) -> Model:
    """``document`` as ``model``. Raises SettingsRefused with every problem found."""
    return _validated(document, document.value, model)


def _house() -> Path:
    return Path(str(files("pitchsweep.configs")))


def _seated(
    document: YamlDocument, path: Path, named: JobFile
) -> tuple[list[Part], list[Path]]:
    """The parts that a job file names, in order, and the file of each."""
    if not named.lot:
        file = _neighbour(document, path, ("part",))
        return [read_settings(file, Part)], [file]
    files = [
        _neighbour(document, path, ("lot", index, "part"))
        for index in range(len(named.lot))
    ]
    parts = [read_settings(file, Part) for file in files]
    places = [seating.place for seating in named.lot]
    return [
        part if place is None else part.model_copy(update={"place": place})
        for part, place in zip(parts, places, strict=True)
    ], files


def _neighbour(document: YamlDocument, path: Path, at: KeyPath) -> Path:
    """The file that a job file names at ``at``, seen from the job file itself."""
    value: Any = document.value
    for key in at:
        value = value[key]
    name = str(value)
    beside = Path(os.path.normpath(path.parent / name))
    if "\0" not in name and beside.is_file():
        return beside
    saying = f"no such file ({beside}); names are relative to the job file"
    problem = Problem(document.name, document.line(at), dotted(at), name, saying)
    raise SettingsRefused([problem])


def _validated(document: YamlDocument, value: Any, model: type[Model]) -> Model:
    try:
        return model.model_validate(value)
    except ValidationError as error:
        _refuse_other_kind(document, model)
        details = error.errors(include_url=False, include_context=False)
        problems = _unique(_problem(document, model, dict(d)) for d in details)
        raise SettingsRefused(problems) from None


def _refuse_other_kind(document: YamlDocument, model: type[Settings]) -> None:
    """Raises SettingsRefused with one plain line for a sound file of another kind."""
    wanted = KINDS.get(model)
    found = {kind for kind in KINDS.values() if kind in document.value}
    # Only a job file names several of them.
    given = "job" if "job" in found or len(found) > 1 else next(iter(found), None)
    if wanted is None or given in (None, wanted):
        return
    saying = f"this is a {given} file; a {wanted} file is asked for here"
    raise SettingsRefused([Problem(document.name, None, "", None, saying)])


def _unique(problems: Iterable[Problem]) -> list[Problem]:
    found = list(dict.fromkeys(problems))
    return sorted(found, key=lambda p: p.line or 0)


def _problem(document: YamlDocument, model: type[Settings], detail: Any) -> Problem:
    path = _place(document, tuple(detail["loc"]))
    kind = detail["type"]
    value = document.written.get(path) if path else None
    if kind == "extra_forbidden":
        saying = _unknown_key(model, path)
    elif kind == "missing":
        value, saying = None, f"is missing; allowed {allowed_text(model, path)}"
    elif kind == "value_error":
        value, saying = None, str(detail["msg"]).removeprefix("Value error, ")
    else:
        saying = f"allowed {allowed_text(model, path) or detail['msg']}"
    if kind == "string_type" and not isinstance(detail["input"], dict | tuple):
        saying += "; put text that looks like a number in quotes"
    if detail["loc"] and detail["loc"][-1] == "[key]":
        value, saying = None, f"as a key, {detail['msg']}"
    return Problem(document.name, document.line(path), dotted(path), value, saying)


def _place(document: YamlDocument, path: KeyPath) -> KeyPath:
    return path[:-1] if path and path[-1] == "[key]" else path


def _unknown_key(model: type[Settings], path: KeyPath) -> str:
    keys = allowed_keys(model, path[:-1])
    near = difflib.get_close_matches(str(path[-1]), keys, n=1, cutoff=0.5)
    if near:
        return f"no such key; the nearest allowed key is {near[0]}"
    return f"no such key; allowed keys are {', '.join(keys)}"
