"""An answers file to be filled in, for ``signoff JOB --answers FILE``. Pure.

Everything stands in it that would be asked at the terminal, answered no: a form that
nobody filled in signs nothing.
"""

import textwrap
from collections.abc import Iterator

from pitchsweep.configs.checklist_model import Item
from pitchsweep.safety.checklist import (
    circumstances_of,
    items_that_apply,
    readings_wanted,
    signatures_needed,
)
from pitchsweep.safety.power_readings import takes_attended_powers
from pitchsweep.safety.sign_off_making import Work, parts_in_words

WIDTH = 88
HEAD = (
    "Say 'yes: true' only where somebody looked and it is so; 'absent: true' where a"
    " remark allows it. Powers come from 'pitchsweep attend', not from here."
)


def answers_form(work: Work) -> str:
    """The form for ``work`` as YAML text: signers, window, every item that applies."""
    here = circumstances_of(work.job)
    lines = [
        f"# Answers for the sign-off of job {work.job.job}:",
        *_remark(f"{parts_in_words(work.job)}.", ""),
        *_remark(HEAD, ""),
        "signers:",
    ]
    for roles in signatures_needed(work.checklist, here):
        allowed = " or ".join(roles)
        lines.append(f"  - {{name: NAME, role: {roles[0]}}}   # role: {allowed}")
    lines += [
        "# valid_from: 2030-01-31T18:00Z   # UTC; now where it is left out",
        f"valid_for_h: {min(14.0, work.checklist.longest_window_h):g}",
        "items:",
    ]
    for name, item in items_that_apply(work.checklist, here).items():
        lines += _item(name, item, work)
    return "\n".join(lines) + "\n"


def _item(name: str, item: Item, work: Work) -> Iterator[str]:
    yield from _remark(item.says, "  ")
    yield f"  {name}:"
    yield "    yes: false"
    if item.may_be_absent:
        yield "    # absent: true   # there is none here"
    if item.asks is not None:
        yield from _remark(item.asks, "    ")
        yield '    words: ""'
    if item.reading is None or takes_attended_powers(item):
        return
    yield "    readings:"
    for of, upper in readings_wanted(item, work.job):
        named = "" if of is None else f"of: {of}, "
        meter = ', meter: "", meter_due: ""' if item.reading.with_meter else ""
        yield (
            f"      - {{{named}value: -1{meter}}}"
            f"   # {item.reading.lower:g} to {upper:g} {item.reading.unit}"
        )


def _remark(text: str, indent: str) -> Iterator[str]:
    mark = f"{indent}# "
    yield from textwrap.wrap(text, WIDTH, initial_indent=mark, subsequent_indent=mark)
