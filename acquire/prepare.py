"""From profiles to what a scan needs before its first point: plan, capture settings, circumstances."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import hypot

from acquire.angles import angles
from acquire.plan import Plan, make_plan
from acquire.pose import Pivot
from acquire.travel import PlanRefused, check_travel
from checks.comb import comb_lines, side_lines
from checks.gate import plan_gate
from checks.observation import Circumstances
from checks.water import speed_of_sound, speed_u
from drivers.roles import CaptureSettings, Drive
from profiles.bench import Bench
from profiles.fitting import misfits
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source
from profiles.units import DEG, MHZ, MM, UM, US

LINEAR_TOLERANCE_M = 5 * UM
ANGULAR_TOLERANCE_RAD = 2e-4


@dataclass(frozen=True)
class Job:
    """A scan with everything that it refers to."""

    bench: Bench
    sensor: Sensor
    source: Source
    scan: Scan

    @property
    def pivot(self) -> Pivot:
        """The correction that the scan asks for."""
        return Pivot.from_profile(self.scan.pivot)

    def drive(self) -> Drive:
        """What the generator is asked for."""
        s = self.source
        return Drive(s.frequency_mhz * MHZ, s.drive_v, s.cycles, 1 / s.repetition_hz)

    def highest_hz(self) -> float:
        """Highest frequency to analyse: wanted, or what source and sensor offer."""
        offered = min(self.source.frequency_mhz * self.source.highest_harmonic, self.sensor.highest_mhz)
        return (self.scan.highest_mhz or offered) * MHZ


def resolved(job: Job, temperature_c: float) -> Job:
    """The job with angles written out where the scan leaves the step open, to what controllers resolve."""
    rotation = job.scan.rotation
    if rotation is None or rotation.highest_mhz is None:
        return job
    theta = angles(rotation, job.sensor.nominal_radius_mm * MM, speed_of_sound(temperature_c))
    listed = tuple(round(float(t) / DEG, 4) + 0.0 for t in theta)
    written = rotation.model_copy(
        update={"angles_deg": listed, "span_deg": None, "step_deg": None, "highest_mhz": None}
    )
    return replace(job, scan=job.scan.model_copy(update={"rotation": written}))


def plan_of(job: Job, temperature_c: float) -> Plan:
    """The plan, checked against profiles, travel and keep-out volumes.

    Raises:
        PlanRefused: with every misfit between the profiles, or the first point that cannot be reached.
    """
    problems = misfits(job.scan, job.bench, job.sensor, job.source)
    if problems:
        raise PlanRefused("\n".join(problems))
    plan = make_plan(job.scan, job.sensor.nominal_radius_mm * MM, speed_of_sound(temperature_c))
    check_travel(plan, job.pivot, job.bench)
    return plan


def first_settings(job: Job, plan: Plan, temperature_c: float, largest_scale_v: float) -> CaptureSettings:
    """Capture settings; without a range in the scan the largest, from which autorange comes down."""
    capture = job.scan.capture
    nearest = min(p.pose[2] for p in plan.points)
    start_s = max(0.0, nearest / speed_of_sound(temperature_c) - capture.lead_us * US)
    if capture.start_us is not None:
        start_s = capture.start_us * US
    return CaptureSettings(
        sample_rate_hz=capture.sample_rate_mhz * MHZ,
        points=capture.points,
        start_s=start_s,
        averages=capture.averages,
        full_scale_v=capture.full_scale_v or largest_scale_v,
    )


def circumstances_of(job: Job, plan: Plan, temperature_c: float, interval_s: float, start_s: float) -> Circumstances:
    """What the checks may know, from the capture as the oscilloscope really does it.

    Raises:
        MeasurementError: burst, record and echo-free time do not fit together.
    """
    source, scan = job.source, job.scan
    speed = speed_of_sound(temperature_c)
    drive_hz = source.frequency_mhz * MHZ
    distances = [p.pose[2] for p in plan.points]
    lateral = max(hypot(p.pose[0], p.pose[1]) for p in plan.points)
    # a focused source is curved, so that its rim is no farther from the focus than its middle
    rim = 0.0 if source.focal_length_mm else source.radius_mm * MM
    gate = plan_gate(
        nearest_m=min(distances),
        farthest_m=max(distances),
        lateral_m=lateral + rim,
        speed_m_s=speed,
        frequency_hz=drive_hz,
        cycles=source.cycles,
        reflector_distance_m=job.bench.geometry.reflector_distance_mm * MM,
        record_start_s=start_s,
        interval_s=interval_s,
        samples=scan.capture.points,
    )
    return Circumstances(
        scan_type=plan.scan_type,
        frequencies_hz=comb_lines(drive_hz, job.highest_hz(), 1 / interval_s),
        side_lines_hz=side_lines(drive_hz, source.cycles),
        drive_hz=drive_hz,
        cycles=source.cycles,
        sample_interval_s=interval_s,
        record_start_s=start_s,
        gate=gate,
        averages=scan.capture.averages,
        distance_m=scan.position.z_mm * MM,
        source_radius_m=source.radius_mm * MM,
        focal_length_m=source.focal_length_mm * MM if source.focal_length_mm else None,
        nominal_radius_m=job.sensor.nominal_radius_mm * MM,
        reflector_distance_m=job.bench.geometry.reflector_distance_mm * MM,
        highest_wanted_hz=job.highest_hz(),
        planned_points=len(plan),
        pivot_x_m=scan.pivot.x_mm * MM,
        pivot_z_m=scan.pivot.z_mm * MM,
        linear_tolerance_m=LINEAR_TOLERANCE_M,
        angular_tolerance_rad=ANGULAR_TOLERANCE_RAD,
        speed_u=speed_u(temperature_c, job.bench.water.temperature_u_c),
    )
