"""What a run may light, as guard and sign-off see it. Pure, but for the checklist."""

from pitchsweep.acquire.sweep_plan import SweepPlan
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_checklist
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.permitted_steps import HIGHEST_POWER_MW, PermittedSteps
from pitchsweep.safety.sign_off_making import Work
from pitchsweep.safety.unattended_permit import work_sha256

READ_AGE_SLACK_S = 10.0


def work_for(job: Job, plan: SweepPlan, checklist_source: str) -> Work:
    """What a sign-off of ``job`` is bound to; reads the checklist.

    Raises SettingsRefused when the checklist cannot be used.
    """
    return Work(
        job=job,
        checklist=read_checklist(checklist_source),
        checklist_source=checklist_source,
        work_sha256=work_digest(plan, job.bench),
    )


def work_digest(plan: SweepPlan, bench: Bench) -> str:
    """The digest of unit and permitted angles, equal to the guard's own."""
    emission, permitted = bench.emission, permitted_steps(plan, bench)
    return work_sha256(
        identity=emission.unit_identity,
        keep_alive_ms=emission.keep_alive_ms,
        has_shutter=emission.switches == "head-shutter",
        line=emission.line,
        channels=emission.interlock_channels,
        angles_deg=permitted.angles_deg,
        tolerance_deg=permitted.tolerance_deg,
        power_ceiling_mw=permitted.power_ceiling_mw,
    )


def step_powers_mw(plan: SweepPlan, bench: Bench) -> dict[int, float]:
    """The power at the part of every step and zero check.

    It is the sum of all lasers where they may be alight together: nobody can tell.
    """
    steps = (*plan.steps, *plan.zero_checks)
    if bench.emission.lasers_at_once == "all":
        all_mw = sum(laser.power_mw for laser in bench.lasers.values())
        return {s.step: all_mw for s in steps}
    return {s.step: bench.lasers[s.laser].power_mw for s in steps}


def step_lasers(plan: SweepPlan) -> dict[int, str]:
    """The laser of every step and zero check."""
    return {s.step: s.laser for s in (*plan.steps, *plan.zero_checks)}


def most_power_mw(plan: SweepPlan, bench: Bench) -> float:
    """The highest power at the part that may be: what the hazard figures are made for.

    Full drive of the strongest laser of the plan, or of all where they may be alight
    together; where a sensor reads it, three of its standard uncertainties above that.
    """
    lasers = bench.lasers
    if bench.emission.lasers_at_once == "all":
        most = sum(full_drive_mw(laser) for laser in lasers.values())
    else:
        most = max(full_drive_mw(lasers[name]) for name in step_lasers(plan).values())
    if bench.power_sensor is None:
        return min(HIGHEST_POWER_MW, most)
    most *= 1.0 + 3.0 * bench.power_sensor.u_relative
    return min(HIGHEST_POWER_MW, most)


def permitted_steps(plan: SweepPlan, bench: Bench) -> PermittedSteps:
    """The stage angle of every step and zero check of ``plan``."""
    longest_s = max(max(s.exposures_ms) for s in plan.steps) / 1000.0
    return PermittedSteps(
        angles_deg={s.step: s.stage_deg for s in (*plan.steps, *plan.zero_checks)},
        tolerance_deg=bench.stage.angle_tolerance_deg,
        read_age_limit_s=min(60.0, longest_s + READ_AGE_SLACK_S),
        power_ceiling_mw=most_power_mw(plan, bench),
    )
