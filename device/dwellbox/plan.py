"""A run's plan: what the host asks for, checked against this box's ratings. The box refuses; the host does not guess."""

from .codes import E_BEYOND_RATING, E_INVALID_PARAMS
from .compat import const

_LEAST_MV = const(1000)
_LEAST_DWELL_MS = const(200)
_MOST_BLEED_MS = const(3600000)
_OVER_PM = const(30)  # how far above its target the part may rise before the run ends
_OVER_MV = const(3000)


class Plan:
    """Whole numbers, as the wire has them."""

    def __init__(self, params):
        """Take checked parameters of a `run` request; what is left out has the wire's default."""
        self.key = params["run_key"]
        self.volts_mv = params["volts_mv"]
        self.dwell_ms = params["dwell_ms"]
        self.expect_pf = params.get("expect_pf", 0)
        self.low_pct = params.get("low_pct", 0)
        self.high_pct = params.get("high_pct", 0)
        self.polar = params.get("polar", False)
        self.ceiling_ua = params.get("ceiling_ua", 0)
        self.bleed_ms = params.get("bleed_ms", 10000)
        self.recovery_ms = params.get("recovery_ms", 0)
        self.nudge = params.get("nudge", True)
        self.fixture = params.get("fixture", False)

    def most_mv(self):
        """Return the voltage on the part above which the run ends."""
        return self.volts_mv + self.volts_mv // 1000 * _OVER_PM + _OVER_MV

    def estimate_ms(self, ratings):
        """Return about how long the run takes: checks, charge, dwell, account, bleed and proof."""
        tau = ratings.tau_ms(self.expect_pf // 1000)
        ramp = self.volts_mv // (ratings.ramp_mv_per_s // 1000)
        charge = 6 * tau if 5 * tau >= ratings.ramp_below_ms else ramp
        account = 4000 if self.expect_pf // 1000 * (self.volts_mv // 1000) > ratings.nudge_above_nc * 1 else 0
        look = 5000 + min(tau, 15000)
        return look + charge + self.dwell_ms + account + self.bleed_ms + self.recovery_ms + 2500


def refusal(plan, ratings):
    """Return None when the box can run the plan, or (error code, what is wrong)."""
    if plan.volts_mv < _LEAST_MV:
        return (E_INVALID_PARAMS, "volts_mv")
    if plan.volts_mv > ratings.volts_mv:
        return (E_BEYOND_RATING, "volts_mv")
    if plan.dwell_ms < _LEAST_DWELL_MS:
        return (E_INVALID_PARAMS, "dwell_ms")
    if plan.dwell_ms > ratings.dwell_ms:
        return (E_BEYOND_RATING, "dwell_ms")
    if plan.bleed_ms > _MOST_BLEED_MS or plan.recovery_ms > _MOST_BLEED_MS:
        return (E_BEYOND_RATING, "bleed_ms")
    nf = plan.expect_pf // 1000
    if nf > ratings.capacitance_nf or ratings.stored_mj(nf, plan.volts_mv) > ratings.energy_mj:
        return (E_BEYOND_RATING, "energy")
    return None
