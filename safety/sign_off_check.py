"""Whether a sign-off counts, and if not, the reason in plain words. Pure.

Three questions, asked in this order: is the record itself whole and signed; does it
still count (ledger, people, time); is it for this very work. Loaded by the guard.
"""

from itertools import permutations

from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.sign_off import SignOff, SignsAs, signed_bytes
from pitchsweep.safety.signing import SIGN_OFF, signature_holds


def why_record_is_not_whole(record: SignOff) -> str | None:
    """None when every named signer signed exactly this statement, each another one."""
    signers = record.statement.signers
    double = _named_twice(signers)
    if double is not None:
        return f"'{double}' signs twice: every signature is another person's"
    keys = tuple(signer.key for signer in signers)
    if not keys or tuple(signed.key for signed in record.signatures) != keys:
        return "it is not signed by the people that it names"
    message = signed_bytes(record.statement)
    for signer, signed in zip(signers, record.signatures, strict=True):
        if not signature_holds(signed, SIGN_OFF, message):
            return (
                f"the signature of '{signer.name}' does not fit what stands there:"
                " the record was edited or signed by somebody else"
            )
    return None


def why_signatures_do_not_suffice(
    needed: tuple[tuple[str, ...], ...], signers: tuple[SignsAs, ...]
) -> str | None:
    """None when every needed signature can be another signer's, in a role it allows."""
    if len(signers) < len(needed):
        return (
            f"{len(needed)} signatures of different people are needed,"
            f" {len(signers)} given"
        )
    for chosen in permutations(signers, len(needed)):
        if all(s.role in roles for s, roles in zip(chosen, needed, strict=True)):
            return None
    wanted = " and ".join(" or ".join(roles) for roles in needed)
    given = ", ".join(f"{s.name} as {s.role}" for s in signers)
    return f"needed: {wanted}, each another person; signed by {given}"


def why_not_in_force(record: SignOff, people: People, utc_s: float) -> str | None:
    """None when the ledger has it, nobody revoked anything, and now is its time."""
    return (
        _why_not_entered(record, people)
        or _why_signers_do_not_count(record, people)
        or why_powers_do_not_count(record, people)
        or why_outside_window(record, utc_s)
    )


def why_outside_window(record: SignOff, utc_s: float) -> str | None:
    """None while ``utc_s`` lies in the window; NaN lies outside."""
    statement = record.statement
    start, end = statement.window_utc_s
    if not utc_s >= start:
        return f"it is not valid yet: it begins {statement.valid_from}"
    if not utc_s < end:
        return f"it has expired: it ended {statement.valid_until}"
    return None


def why_powers_do_not_count(record: SignOff, people: People) -> str | None:
    """None when the power of every laser was read under an attended permit.

    Each reading must be the ledger's own, its reader not revoked, and none made since
    may be above what was signed for.
    """
    statement = record.statement
    lasers = [str(laser["laser"]) for laser in statement.lasers]
    if sorted(lasers) != sorted(str(power["laser"]) for power in statement.powers):
        return "not every laser has a power reading made under an attended permit"
    for power in statement.powers:
        laser, most_mw = str(power["laser"]), power["highest_allowed_mw"]
        of_it = [
            reading
            for reading in people.powers
            if (reading.bench, reading.simulated, reading.laser)
            == (statement.bench, statement.simulated, laser)
        ]
        own = next((r for r in of_it if r.hash == power["hash"]), None)
        claimed = (power["entry"], power["value_mw"], power["key"])
        if own is None or (own.n, own.value_mw, own.key) != claimed:
            return f"the people's ledger has no such power reading of laser '{laser}'"
        reader = people.signer_of(own.key)
        if reader is None or not reader.active:
            return f"the power of laser '{laser}' was read by '{own.by}', now revoked"
        if not isinstance(most_mw, int | float):
            return f"it does not say how much power laser '{laser}' may have"
        above = [r for r in of_it if r.n >= own.n and not r.value_mw <= most_mw]
        if above:
            return (
                f"laser '{laser}' was read at {above[0].value_mw:g} mW on"
                f" {above[0].utc}, above the {most_mw:g} mW that it may have"
            )
    return None


def why_for_another_job(
    record: SignOff, *, bench: str, job: str, simulated: bool
) -> str | None:
    """None when it names this bench and this job, on the same kind of bench."""
    statement = record.statement
    if statement.bench != bench:
        return f"it is for bench '{statement.bench}', this is bench '{bench}'"
    if statement.simulated != simulated:
        kind = "a simulated" if statement.simulated else "a real"
        other = "simulated" if simulated else "real"
        return f"it is for {kind} bench, this one is {other}"
    if statement.job != job:
        return f"it is for job '{statement.job}', this is job '{job}'"
    return None


def why_not_this_work(record: SignOff, work_sha256: str) -> str | None:
    """None when unit and permitted angles are those that were signed."""
    if record.statement.work_sha256 == work_sha256:
        return None
    return "the unit or the angles that may be lit are not those that were signed"


def readable_role(role: str) -> str:
    """The role as people write it."""
    return role.replace("-", " ")


def _named_twice(signers: tuple[SignsAs, ...]) -> str | None:
    seen: set[str] = set()
    for signer in signers:
        if signer.name in seen or signer.key in seen:
            return signer.name
        seen |= {signer.name, signer.key}
    return None


def _why_not_entered(record: SignOff, people: People) -> str | None:
    entered = people.sign_offs.get(record.statement.id)
    if entered is None:
        return "the people's ledger has no such sign-off"
    if entered.sha256 != record.sha256:
        return "it is not the one that the people's ledger has under this number"
    if (entered.n, entered.hash) != (record.entered.entries, record.entered.head):
        return "the people's ledger has it at another place than the record says"
    if entered.withdrawn_utc:
        return (
            f"it was revoked by {entered.withdrawn_by} on {entered.withdrawn_utc}:"
            f" {entered.withdrawn_for}"
        )
    return None


def _why_signers_do_not_count(record: SignOff, people: People) -> str | None:
    for signs in record.statement.signers:
        signer = people.signer_of(signs.key)
        if signer is None or signer.name != signs.name:
            return f"'{signs.name}' with this key is not enrolled here"
        if not signer.active:
            return (
                f"the signer '{signer.name}' was revoked on {signer.revoked_utc}:"
                f" {signer.revoked_for}"
            )
        if signs.role not in signer.roles:
            return (
                f"'{signer.name}' signs as {readable_role(signs.role)} but is enrolled"
                f" as {' and '.join(map(readable_role, signer.roles))} only"
            )
    return None
