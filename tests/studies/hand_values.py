"""Plants that can be worked out by hand, each with its exact value.

Chains are solved here from their rate matrix, written out by hand; nothing of the package is used.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import comb, exp, expm1
from typing import Any

import numpy as np
from scipy.linalg import expm

YEAR = 8760.0


@dataclass(frozen=True)
class Case:
    """One question with its value, and how much is simulated for it."""

    name: str
    spec: Mapping[str, Any]
    measure: str
    value: float
    of: str | None = None
    at: float | None = None
    horizon: float | None = None
    histories: int = 1
    first_failure: bool = False


def long_run(rates: Mapping[tuple[int, int], float]) -> np.ndarray:
    """Solve a chain of states 0, 1, … for its long-run probabilities."""
    size = 1 + max(max(pair) for pair in rates)
    matrix = np.zeros((size, size))
    for (source, target), rate in rates.items():
        matrix[source, target] += rate
        matrix[source, source] -= rate
    matrix[:, 0] = 1.0
    return np.asarray(np.linalg.solve(matrix.T, np.eye(size)[0]))


def at_time(rates: Mapping[tuple[int, int], float], time: float) -> np.ndarray:
    """Probabilities of a chain that starts in state 0."""
    size = 1 + max(max(pair) for pair in rates)
    matrix = np.zeros((size, size))
    for (source, target), rate in rates.items():
        matrix[source, target] += rate
        matrix[source, source] -= rate
    return np.asarray(expm(matrix * time)[0])


def one(unit: Mapping[str, Any], **more: Any) -> dict[str, Any]:
    """A plant of a single unit `u`."""
    return {"units": {"u": dict(unit)}, "system": "u", **more}


def pair(unit: Mapping[str, Any], group: Mapping[str, Any], *, count: int = 2, **more: Any) -> dict[str, Any]:
    """A plant of one group `g` of alike units `u`."""
    members = [{"unit": "u", "count": count}]
    return {"units": {"u": dict(unit)}, "groups": {"g": {"members": members, **group}}, "system": "g", **more}


ACTIVE = {"required": 1, "redundancy": "active"}
COLD = {"required": 1, "redundancy": "cold_standby"}
WORN = {"failure_rate": "1e-3 /h", "repair_time": "100 h"}
FOR_GOOD = {"failure_rate": "1e-3 /h"}
L, M = 1e-3, 1e-2  # failure and repair rate of the above, per hour
HIDDEN = {"failure_rate": "1e-4 /h", "repair_time": "0 h", "detected": "0 %"}
H, T = 1e-4, 2000.0  # failure rate of the above, and a test interval
_SAW = 1.0 + expm1(-H * T) / (H * T)  # mean of 1 - exp(-H s) over (0, T)


def single_units() -> list[Case]:
    down = L / (L + M)
    spread = one({"failure_rate": "1e-3 /h", "repair_time": {"fixed": "400 h"}})
    success = one({**WORN, "repair_success": "50 %"})
    delay = one({**WORN, "repair_stages": 3, "logistic_delay": "50 h"})
    return [
        Case("single, long run", one(WORN), "steady_state_unavailability", down, horizon=2e7),
        Case("single, failures", one(WORN), "failures_per_year", YEAR * L * M / (L + M), horizon=2e7),
        Case("single, at 50 h", one(WORN), "unavailability", down * -expm1(-(L + M) * 50), at=50, histories=20000),
        Case("single, failed by 500 h", one(WORN), "unreliability", -expm1(-0.5), at=500, histories=3000),
        Case(
            "repair that succeeds half the time", success, "steady_state_unavailability", L / (L + M / 2), horizon=2e7
        ),
        Case("fixed repair, before it can end", spread, "unavailability", -expm1(-0.3), at=300, histories=3000),
        Case("fixed repair, long run", spread, "steady_state_unavailability", 400 / 1400, horizon=1e7),
        Case("delay before a staged repair", delay, "steady_state_unavailability", 150 / 1150, horizon=2e7),
        Case(
            "failed at the start",
            one(WORN, initial={"u": "failed"}),
            "unavailability",
            down + (1 - down) * exp(-(L + M) * 60),
            at=60,
            histories=3000,
        ),
        Case(
            "two in series that rest while down",
            {
                "units": {"u": WORN, "v": {"failure_rate": "2e-3 /h", "repair_time": "50 h"}},
                "system": {"all_of": ["u", "v"]},
                "while_down": "stop",
            },
            "steady_state_unavailability",
            1 - 1 / (1 + 0.1 + 0.1),
            horizon=2e7,
        ),
    ]


def redundancy() -> list[Case]:
    c = 0.9
    # 0 both good, 1 covered fault, 2 uncovered fault, 3 both failed; a crew for each unit.
    covered = long_run(
        {(0, 1): 2 * L * c, (0, 2): 2 * L * (1 - c), (1, 0): M, (1, 3): L, (2, 0): M, (2, 3): L, (3, 1): 2 * M}
    )
    p = 0.2
    # 0 all good, 1 uncovered, 2 one on duty and one failed, 3 both failed: cold, start failure p, coverage c, one crew.
    manual = long_run(
        {
            (0, 2): L * c * (1 - p),
            (0, 3): L * c * p + 0,
            (0, 1): L * (1 - c),
            (1, 2): 1.0 * (1 - p),
            (1, 3): 1.0 * p,
            (1, 0): M,
            (2, 0): M,
            (2, 3): L,
            (3, 2): M,
        }
    )
    lock = pair(
        {"failure_rate": "200 per million hours", "repair_time": "24 h", "start_failure": "2 %"},
        {**COLD, "switchover": {"coverage": 0.95, "uncovered": {"outcome": "manual_takeover", "time": "0.75 h"}}},
        crews={"fitters": {"size": 1, "repairs": ["u"]}},
    )
    slow = pair(WORN, {**COLD, "switchover": {"time": "10 h"}}, crews={"f": {"size": 1, "repairs": ["u"]}})
    # 0 good, 1 starting (cold: cannot fail), 2 on duty with one failed, 3 both failed.
    slow_chain = long_run({(0, 1): L, (1, 2): 0.1, (1, 0): M, (2, 0): M, (2, 3): L, (3, 2): M})
    restart = pair(WORN, {**COLD, "switchover": {"coverage": 0, "uncovered": {"outcome": "restart", "time": "20 h"}}})
    # 0 good, 1 waiting for the restart with one under repair, whose end is the last repair.
    fallen = pair(WORN, {**ACTIVE, "switchover": {"coverage": c, "uncovered": {"outcome": "all_failed"}}})
    fallen_chain = long_run({(0, 1): 2 * L * c, (0, 2): 2 * L * (1 - c), (1, 0): M, (1, 2): L, (2, 1): 2 * M})
    slow_hot = pair(FOR_GOOD, {"required": 1, "redundancy": "hot_standby", "switchover": {"time": "500 h"}}, count=3)
    # 0 on duty, two wait; 1 being started, one waits; 2 on duty, one waits; 3 being started; 4 on duty; 5 none.
    # A start that is lost is begun anew with the standby that is left.
    begun_anew = at_time(
        {
            (0, 1): L,
            (0, 2): 2 * L,
            (1, 2): 0.002,
            (1, 3): 2 * L,
            (2, 3): L,
            (2, 4): L,
            (3, 4): 0.002,
            (3, 5): L,
            (4, 5): L,
        },
        1500.0,
    )
    shared = pair(FOR_GOOD, {**ACTIVE, "load_sharing": {2: 1, 1: 3}})
    warm = pair(FOR_GOOD, {"required": 1, "redundancy": "warm_standby", "dormancy_factor": 0.5})
    trains = {
        "units": {"a": FOR_GOOD, "b": {"failure_rate": "2e-3 /h"}},
        "groups": {
            "one": {"members": ["a", "b"], "required": 2},
            "two": {"members": ["a", "b"], "required": 2},
            "g": {"members": ["one", "two"], **COLD},
        },
        "system": "g",
    }
    preferred = {
        "units": {"p": WORN, "s": {"failure_rate": "0 /h"}},
        "groups": {"g": {"members": ["p", "s"], **COLD, "return_to_preferred": True}},
        "system": "g",
    }
    again = pair(WORN, {**COLD, "required": 1, "after_repair": "start_again"}, count=1)
    three = pair(
        WORN,
        {"required": 2, "redundancy": "active", "coverage": [0.9, 0.5]},
        count=4,
        crews={"f": {"size": 1, "repairs": ["u"]}},
    )
    # Four, two needed, one crew: failed 0, 1, 2, 3, 4, then uncovered with 1, 2 failed; with 2 good left it draws.
    three_chain = long_run(
        {
            (0, 1): 4 * L * 0.9,
            (0, 5): 4 * L * 0.1,
            (1, 2): 3 * L * 0.5,
            (1, 6): 3 * L * 0.5,
            (2, 3): 2 * L,
            (3, 4): L,
            (1, 0): M,
            (2, 1): M,
            (3, 2): M,
            (4, 3): M,
            (5, 0): M,
            (5, 6): 3 * L,
            (6, 1): M,
            (6, 3): 2 * L,
        }
    )
    return [
        Case(
            "hot pair with coverage",
            pair(WORN, {**ACTIVE, "coverage": c}),
            "steady_state_unavailability",
            covered[2] + covered[3],
            horizon=1e7,
        ),
        Case(
            "cold pair, starts that fail, for good",
            pair({**FOR_GOOD, "start_failure": p}, COLD),
            "unreliability",
            1 - exp(-0.8) * (1 + (1 - p) * 0.8),
            at=800,
            histories=3000,
        ),
        Case(
            "cold pair started by hand",
            pair(
                {**WORN, "start_failure": p},
                {**COLD, "switchover": {"coverage": c, "uncovered": {"outcome": "manual_takeover", "time": "1 h"}}},
                crews={"f": {"size": 1, "repairs": ["u"]}},
            ),
            "steady_state_unavailability",
            manual[1] + manual[3],
            horizon=1e7,
        ),
        Case(
            "lock gate drive, first failure",
            lock,
            "mean_time_to_first_failure",
            68378.6,
            histories=1500,
            first_failure=True,
        ),
        Case("lock gate drive, failures", lock, "failures_per_year", 0.128652, horizon=1e8),
        Case(
            "takeover that takes time", slow, "steady_state_unavailability", slow_chain[1] + slow_chain[3], horizon=1e7
        ),
        Case(
            "a start that is lost is begun anew",
            slow_hot,
            "unavailability",
            begun_anew[1] + begun_anew[3] + begun_anew[5],
            at=1500,
            histories=8000,
        ),
        Case("restart, or the last repair", restart, "steady_state_unavailability", L / (L + M + 0.05), horizon=2e7),
        Case("all fail with an uncovered fault", fallen, "steady_state_unavailability", fallen_chain[2], horizon=1e7),
        Case(
            "load shared by two",
            shared,
            "mean_time_to_first_failure",
            500 + 1000 / 3,
            histories=3000,
            first_failure=True,
        ),
        Case("warm standby", warm, "mean_time_to_first_failure", 1000 / 1.5 + 1000, histories=3000, first_failure=True),
        Case("cold standby train", trains, "unreliability", 1 - exp(-1.5) * 2.5, at=500, histories=3000),
        Case("return to the preferred", preferred, "starts_per_year", 2 * YEAR * L * M / (L + M), horizon=1e7),
        Case("a start after each repair", again, "starts_per_year", YEAR * L * M / (L + M), horizon=1e7),
        Case(
            "coverage by number failed",
            three,
            "steady_state_unavailability",
            three_chain[3] + three_chain[4] + three_chain[5] + three_chain[6],
            horizon=5e6,
        ),
    ]


def switches() -> list[Case]:
    q = 0.2
    refusing = pair(
        WORN, {**COLD, "switchover": {"switch": {"failure_on_demand": q}}}, crews={"f": {"size": 1, "repairs": ["u"]}}
    )
    # 0 good, 1 refused (until repair), 2 on duty with one failed, 3 both failed.
    refused = long_run({(0, 1): L * q, (0, 2): L * (1 - q), (1, 0): M, (2, 0): M, (2, 3): L, (3, 2): M})
    false = pair(FOR_GOOD, {**COLD, "switchover": {"switch": {"false_operation_rate": "0.01 /h"}}})
    latent = pair(
        {"failure_rate": "1e-3 /h", "repair_time": "100 h"},
        {**COLD, "switchover": {"switch": {"failure_rate": "2e-3 /h", "latent": True, "repair_time": "25 h"}}},
        crews={"f": {"size": 1, "repairs": ["u"]}},
    )
    s, r = 2e-3, 0.04
    # 0 all good; 1 switch failed, hidden; 2 second on duty; 3 like 2, switch hidden; 4 place empty, switch in
    # repair; 5 all good, switch in repair; 6 second on duty, switch in repair; 7 both failed; 8, 9 like 7, switch
    # hidden, in repair.  A covered fault calls the switch only where a standby waits.
    chain = long_run(
        {
            (0, 1): s,
            (0, 2): L,
            (1, 4): L,
            (2, 0): M,
            (2, 3): s,
            (2, 7): L,
            (3, 1): M,
            (3, 8): L,
            (4, 2): r,
            (4, 5): M,
            (5, 0): r,
            (5, 4): L,
            (6, 2): r,
            (6, 5): M,
            (6, 9): L,
            (7, 2): M,
            (7, 8): s,
            (8, 3): M,
            (9, 7): r,
            (9, 6): M,
        }
    )
    return [
        Case("switch that refuses", refusing, "steady_state_unavailability", refused[1] + refused[3], horizon=1e7),
        Case(
            "latent switch",
            latent,
            "steady_state_unavailability",
            chain[4] + chain[7] + chain[8] + chain[9],
            horizon=1e7,
        ),
        Case("needless starts", false, "unreliability", 1 - exp(-0.5) * 1.5, at=500, histories=3500),
    ]


def repair() -> list[Case]:
    # Four alike, one crew: birth and death by the number failed.
    weights = np.array([comb(4, k) * float(np.prod(np.arange(1, k + 1))) * (L / M) ** k for k in range(5)])
    busy = weights / weights.sum()
    four = pair(WORN, ACTIVE, count=4, crews={"f": {"size": 1, "repairs": ["u"]}})
    calls = np.array([(4 - k) * L for k in range(5)]) * busy
    two = {
        "units": {
            "u": {"failure_rate": "5e-3 /h", "repair_time": "100 h"},
            "v": {"failure_rate": "2e-3 /h", "repair_time": "50 h"},
        },
        "system": {"any_of": ["u", "v"]},
    }
    a, b, x, y = 5e-3, 2e-3, 1e-2, 2e-2
    # 0 good, 1 u repaired, 2 v repaired, 3 both failed and u repaired, 4 both failed and v repaired.
    first_come = long_run({(0, 1): a, (0, 2): b, (1, 0): x, (1, 3): b, (2, 0): y, (2, 4): a, (3, 2): x, (4, 1): y})
    kept = {**two, "crews": {"f": {"size": 1, "repairs": ["v", "u"], "preemptive": False}}}
    queued = {**two, "crews": {"f": {"size": 1, "repairs": ["u", "v"], "queue": "first_come"}}}
    urgent = {**two, "crews": {"f": {"size": 1, "repairs": ["v", "u"]}}}
    lead = 0.5  # failure rate times lead time
    spare = {"for": ["u"], "stock": 1, "lead_time": "500 h"}
    drawn = one(FOR_GOOD, spares={"s": spare})
    failed = one(FOR_GOOD, spares={"s": {**spare, "order": "when_failed"}})
    # 0 both good, 1 one failed, 2 both failed and repaired, 3 one left under repair.
    deferred = long_run({(0, 1): 2 * L, (1, 2): L, (2, 3): 2 * M, (3, 0): M, (3, 2): L})
    visited = pair(
        {"failure_rate": "1e-3 /h", "repair_time": "0.001 h"}, {**ACTIVE, "repair_when": {"visits_every": "500 h"}}
    )
    k = 0.5
    visits = (k - 2 * -expm1(-k) + -expm1(-2 * k) / 2) / k  # mean of (1 - exp(-s))² over (0, k)
    restored = pair(FOR_GOOD, ACTIVE, restoration={"time": "300 h", "to": "all_good"})
    offline = pair(WORN, {**ACTIVE, "offline_repair": True})
    offline_chain = long_run({(0, 1): 2 * L, (1, 0): M, (1, 2): L, (2, 1): 2 * M})
    return [
        Case("one crew, its use", four, "crew_utilisation", 1 - busy[0], of="f", horizon=4e6),
        Case(
            "one crew, who waits",
            four,
            "waiting_for_crew",
            float(sum((k - 1) * busy[k] for k in range(2, 5))),
            of="f",
            horizon=4e6,
        ),
        Case(
            "one crew, chance of waiting",
            four,
            "probability_of_waiting",
            float(calls[1:].sum() / calls.sum()),
            of="f",
            horizon=4e6,
        ),
        Case("one crew, units failed", four, "mean_units_failed", float(busy @ np.arange(5)), horizon=4e6),
        Case("one crew, first come", queued, "steady_state_unavailability", first_come[3] + first_come[4], horizon=3e6),
        Case(
            "one crew, never called away",
            kept,
            "steady_state_unavailability",
            first_come[3] + first_come[4],
            horizon=3e6,
        ),
        Case(
            "one crew, called away",
            urgent,
            "waiting_for_crew",
            long_run({(0, 1): a, (0, 2): b, (1, 0): x, (1, 3): b, (2, 0): y, (2, 3): a, (3, 1): y})[3],
            of="f",
            horizon=3e6,
        ),
        Case(
            "spares ordered when drawn",
            drawn,
            "steady_state_unavailability",
            lead**2 / (1 + lead + lead**2),
            horizon=5e6,
        ),
        Case(
            "spares ordered when failed",
            failed,
            "steady_state_unavailability",
            lead**2 / 2 / (1 + lead + lead**2 / 2),
            horizon=5e6,
        ),
        Case(
            "repair once the system is down",
            pair(WORN, {**ACTIVE, "repair_when": "system_down"}),
            "steady_state_unavailability",
            deferred[2],
            horizon=1e7,
        ),
        Case(
            "repair once two are failed",
            pair(WORN, {**ACTIVE, "repair_when": {"failed": 2}}),
            "steady_state_unavailability",
            deferred[2],
            horizon=1e7,
        ),
        Case("repair at visits", visited, "steady_state_unavailability", visits, horizon=3e6),
        Case("restoration of the whole", restored, "steady_state_unavailability", 300 / 1800, horizon=1e7),
        Case("off-line repair", offline, "steady_state_unavailability", 1 - offline_chain[0], horizon=1e7),
    ]


def hidden_faults() -> list[Case]:
    test = {"of": ["u"], "interval": f"{T:g} h"}
    d = 50.0
    late = T - d
    lasting = (d + late - -expm1(-H * late) / H) / T
    left = 0.1
    # Only a unit that is found good is left out: a repair ends with a check.
    # Coverage 60 %, all found every fourth time; good at each fourth test, so the four intervals follow by hand.
    good, found_late, down = 1.0, 0.0, 0.0
    for _ in range(4):
        down += found_late * T + good * T * _SAW + (1 - good - found_late) * T
        lost = good * -expm1(-H * T)
        good, found_late = good * exp(-H * T) + 0.6 * lost, found_late + 0.4 * lost
    partial = {"tests": {"often": {**test, "coverage": "60 %"}, "all": {"of": ["u"], "interval": f"{4 * T:g} h"}}}
    call = 1e-3
    demand = one(HIDDEN | {"revealed_by": ["demand"]}, demand={"rate": f"{call} /h"})
    told = {"units": {"u": HIDDEN | {"revealed_by": ["system_failure"]}, "v": {"failure_rate": "0 /h"}}, "system": "u"}
    two = pair(HIDDEN, ACTIVE, tests={"t": test})
    x = H * T
    both = (x - 2 * -expm1(-x) + -expm1(-2 * x) / 2) / x
    beta = pair(HIDDEN, ACTIVE, tests={"t": test}, common_causes={"c": {"members": ["u"], "beta": "20 %"}})
    # Survival of the pair: exp(-0.2 x)(2 exp(-0.8 x) - exp(-1.6 x)), mean over (0, x).
    common = 1 - (2 * -expm1(-x) - -expm1(-1.8 * x) / 1.8) / x
    modes = {
        "stays": {"share": "60 %", "detected": "0 %"},
        "acts": {"share": "40 %", "effect": "acts_needlessly", "detected": 1, "repair_time": "100 h"},
    }
    safe = one({"failure_rate": "1e-4 /h", "repair_time": "0 h", "failure_modes": modes}, tests={"t": test})
    return [
        Case("proof test", one(HIDDEN, tests={"t": test}), "pfd_average", _SAW, horizon=5e7),
        Case("proof test, failures", one(HIDDEN, tests={"t": test}), "pfh", -expm1(-H * T) / T, horizon=5e7),
        Case(
            "proof test that lasts",
            one(HIDDEN, tests={"t": {**test, "duration": f"{d:g} h"}}),
            "pfd_average",
            lasting,
            horizon=5e7,
        ),
        Case(
            "left out after a test",
            one(HIDDEN, tests={"t": {**test, "left_out": left}}),
            "pfd_average",
            left * exp(-H * T) + (1 - left * exp(-H * T)) * _SAW,
            horizon=5e7,
        ),
        Case("tests of two depths", one(HIDDEN, **partial), "pfd_average", down / (4 * T), horizon=5e7),
        Case("pair tested together", two, "pfd_average", both, horizon=5e7),
        Case("pair with a common cause", beta, "pfd_average", common, horizon=5e7),
        Case("demands reveal", demand, "hazardous_events_per_year", YEAR * call * H / (H + call), horizon=5e7),
        Case("revealed by its own failure", told, "steady_state_unavailability", 0.0, horizon=1e6),
        Case("needless action", safe, "spurious_failures_per_year", _spurious(6e-5, 4e-5, 1e-2), horizon=3e7),
        Case("tests in a year", one(HIDDEN, tests={"t": test, "s": test}), "tests_per_year", 2 * YEAR / T, horizon=1e6),
    ]


def _spurious(stuck: float, acts: float, mended: float) -> float:
    """Needless actions in a year of a unit that is tested every T: states good, stuck (until a test), acting."""
    matrix = np.array([[-stuck - acts, stuck, acts], [0.0, 0.0, 0.0], [mended, 0.0, -mended]])
    step = expm(matrix * T)
    test = np.array([[1.0, 0, 0], [1.0, 0, 0], [0, 0, 1.0]])
    values, vectors = np.linalg.eig((step @ test).T)
    start = np.real(vectors[:, np.argmax(np.real(values))])
    start /= start.sum()
    # Hours spent in the good state over one interval, by a block exponential.
    block = np.zeros((6, 6))
    block[:3, :3] = matrix
    block[:3, 3:] = np.eye(3)
    return float(YEAR * acts * (start @ expm(block * T)[:3, 3:])[0] / T)


def common_causes() -> list[Case]:
    b = 0.2
    pair_beta = pair(FOR_GOOD, ACTIVE, common_causes={"c": {"members": ["u"], "beta": b}})
    t = 700.0
    letters = pair(FOR_GOOD, ACTIVE, count=3, common_causes={"c": {"members": ["u"], "greek_letters": [0.4, 0.5]}})
    mgl = [0.6, 0.4 * 0.5 / 2, 0.4 * 0.5]
    alphas = [0.7, 0.2, 0.1]
    mean = 0.7 + 0.4 + 0.3
    cause = {"members": ["u"], "alpha_factors": alphas}
    staggered = pair(FOR_GOOD, ACTIVE, count=3, common_causes={"c": {**cause, "testing": "staggered"}})
    together = pair(FOR_GOOD, ACTIVE, count=3, common_causes={"c": {**cause, "testing": "simultaneous"}})
    cold = pair(FOR_GOOD, COLD, common_causes={"c": {"members": ["u"], "beta": b}})
    spared = pair(FOR_GOOD, COLD, common_causes={"c": {"members": ["u"], "beta": b, "exposed": "on_duty"}})
    across = {
        "units": {"u": FOR_GOOD, "v": FOR_GOOD},
        "system": {"any_of": ["u", "v"]},
        "common_causes": {"c": {"members": ["u", "v"], "beta": b}},
    }
    pair_value = 1 - exp(-b * L * t) * (2 * exp(-(1 - b) * L * t) - exp(-2 * (1 - b) * L * t))
    # Cold pair: both alive while no shock came; then the second alone at its full rate.
    cold_value = at_time({(0, 1): L * (1 - b), (0, 2): L * b, (1, 2): L}, t)[2]
    return [
        Case("pair with beta", pair_beta, "unreliability", pair_value, at=t, histories=3000),
        Case("beta across units", across, "unreliability", pair_value, at=t, histories=3000),
        Case("three with greek letters", letters, "unreliability", _three(mgl, t), at=t, histories=4000),
        Case(
            "three with alpha factors, staggered",
            staggered,
            "unreliability",
            _three([0.7, 0.2 / 2, 0.1], t),
            at=t,
            histories=4000,
        ),
        Case(
            "three with alpha factors, simultaneous",
            together,
            "unreliability",
            _three([0.7 / mean, 2 * 0.2 / mean / 2, 3 * 0.1 / mean], t),
            at=t,
            histories=4000,
        ),
        Case("cold pair exposed", cold, "unreliability", cold_value, at=t, histories=4000),
        Case(
            "cold pair, exposed on duty", spared, "unreliability", 1 - exp(-L * t) * (1 + L * t), at=t, histories=4000
        ),
    ]


def _three(shares: list[float], time: float) -> float:
    """Chance that all of three are failed: a chain over the sets of good units, struck by named sets."""
    rates: dict[tuple[int, int], float] = {}
    for good in range(8):
        for struck in range(1, 8):
            left = good & ~struck
            if left != good:
                pair_of = 7 - good, 7 - left
                rates[pair_of] = rates.get(pair_of, 0.0) + L * shares[struck.bit_count() - 1]
    return float(at_time(rates, time)[7])


def schedules() -> list[Case]:
    winter = one(
        WORN,
        phases=[
            {"name": "summer", "duration": "300 h"},
            {"name": "winter", "duration": "200 h", "rate_factors": {"u": 5}, "repair": False, "repeat": True},
        ],
    )
    harder = pair(
        FOR_GOOD, ACTIVE, phases=[{"name": "easy", "duration": "400 h"}, {"name": "hard", "required": {"g": 2}}]
    )
    p = exp(-0.4)
    # From summer to winter to summer: the good share at the start of summer, then the mean over both.
    down, total = L / (L + M), L + M
    keep, hold = exp(-total * 300), exp(-5 * L * 200)
    good = (1 - down) * (1 - keep) * hold / (1 - keep * hold)
    summer = (1 - down) * 300 + (good - (1 - down)) * (1 - keep) / total
    at_winter = (1 - down) + (good - (1 - down)) * keep
    mean_up = (summer + at_winter * (1 - hold) / (5 * L)) / 500
    return [
        Case("harder phase, failed by then", harder, "unreliability", 1 - p * p, at=400, histories=4000),
        Case("harder phase, later", harder, "unreliability", 1 - exp(-2 * 0.5), at=500, histories=4000),
        Case("winter without repair", winter, "steady_state_unavailability", 1 - mean_up, horizon=3e6),
        Case("easy phase", harder, "unreliability", (1 - exp(-0.3)) ** 2, at=300, histories=4000),
    ]


def deliveries() -> list[Case]:
    good = M / (L + M)
    two = pair(WORN, {"required": 2}, levels={"half": "50 %"})
    return [
        Case("delivered share", two, "mean_capacity", good, horizon=1e7),
        Case("at least half", two, "level_probability", 1 - (1 - good) ** 2, of="half", horizon=1e7),
    ]


CASES = [
    *single_units(),
    *redundancy(),
    *switches(),
    *repair(),
    *hidden_faults(),
    *common_causes(),
    *schedules(),
    *deliveries(),
]
