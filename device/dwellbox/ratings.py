"""What this box is: resistors, ratings and times, from the reference box's file and the stricter settings of this one.

Everything is a whole number in the unit its name says. Settings may only make a box stricter: a number beyond the reference
hardware is refused, and with it every run, until settings that fit are written.
"""

# name in the settings: (group and name in the reference box's file, least value a setting may have)
STRICTER = {
    "volts_mv": ("ratings", 1000),
    "energy_mj": ("ratings", 1),
    "capacitance_nf": ("ratings", 1),
    "dwell_ms": ("ratings", 1000),
    "part_temp_mc": ("ratings", 30000),
}


class Ratings:
    """The numbers of one box. `problem` is None, or says in words why the settings cannot be used."""

    def __init__(self, reference, settings):
        """Take the reference box (a dict as its file has it) and this box's settings (a dict, or None)."""
        ratings = reference["ratings"]
        self.model = reference["model"]
        self.volts_mv = ratings["volts_mv"]
        self.energy_mj = ratings["energy_mj"]
        self.capacitance_nf = ratings["capacitance_nf"]
        self.dwell_ms = ratings["dwell_ms"]
        self.part_temp_mc = ratings["part_temp_mc"]
        self.problem = None
        if settings is not None:
            self.problem = check_settings(reference, settings)
            if self.problem is None:
                self._take(settings)
        self._circuit(reference)
        self._safety(reference)
        self._run(reference)

    def _take(self, settings):
        self.volts_mv = settings.get("volts_mv", self.volts_mv)
        self.energy_mj = settings.get("energy_mj", self.energy_mj)
        self.capacitance_nf = settings.get("capacitance_nf", self.capacitance_nf)
        self.dwell_ms = settings.get("dwell_ms", self.dwell_ms)
        self.part_temp_mc = settings.get("part_temp_mc", self.part_temp_mc)

    def _circuit(self, reference):
        paths = reference["paths"]
        self.charge_ohm = paths["charge_ohm"]
        self.bleed_ohm = paths["bleed_ohm"][0]
        self.shunts_ohm = tuple(paths["shunts_ohm"])
        self.divider_ratio = (paths["divider_top_ohm"] + paths["divider_bottom_ohm"]) // paths[
            "divider_bottom_ohm"
        ]
        self.divider_kohm = (paths["divider_top_ohm"] + paths["divider_bottom_ohm"]) // 1000
        self.ranges_mv = tuple(reference["converter"]["ranges_mv"])
        self.reference_mv = reference["converter"]["reference_mv"]
        self.tolerance_pm = paths["tolerance_ppm"] // 1000

    def _safety(self, reference):
        safe = reference["safe"]
        self.safe_mv = safe["safe_mv"]
        self.still_ms = safe["still_ms"]
        self.rebound_ms = safe["rebound_ms"]
        self.proof_bleed_ms = safe["proof_bleed_ms"]
        self.silence_ms = safe["silence_ms"]
        self.disagree_mv = safe["disagree_mv"]
        times = reference["times"]
        self.period_ms = times["period_ms"]
        self.window_ms = times["window_ms"]
        self.ring_s = times["ring_s"]
        self.relay_ms = times["relay_ms"]
        self.pump_hold_ms = reference["supply"]["pump_hold_ms"]

    def _run(self, reference):
        run = reference["run"]
        self.prove_mv = run["prove_mv"]
        self.look_mv = run["look_mv"]
        self.ramp_mv_per_s = run["ramp_mv_per_s"]
        self.ramp_below_ms = run["ramp_below_ms"]
        self.nudge_mv = run["nudge_mv"]
        self.nudge_above_nc = run["nudge_above_nc"]

    def stored_mj(self, capacitance_nf, volts_mv):
        """Return C V**2 / 2 in millijoules, rounded up."""
        volts = (volts_mv + 999) // 1000
        return (capacitance_nf * volts * volts + 1999999) // 2000000

    def tau_ms(self, capacitance_nf):
        """Return the charge path's time constant in milliseconds for a capacitance in nanofarads."""
        return capacitance_nf * (self.charge_ohm // 1000) // 1000


def check_settings(reference, settings):
    """Return None when `settings` fit the hardware, or one sentence that says what does not."""
    if not isinstance(settings, dict):
        return "settings are not an object"
    for name in settings:
        if name not in STRICTER:
            return "unknown setting " + str(name)[:24]
        value = settings[name]
        group, least = STRICTER[name]
        if type(value) is not int:
            return name + " is not a whole number"
        if value < least or value > reference[group][name]:
            return name + " is outside " + str(least) + " to " + str(reference[group][name])
    return None
