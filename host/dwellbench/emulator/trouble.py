"""What each fault does to the world: one row a kind, switched on and off."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

from dwellbench.emulator.faults import Fault
from dwellbench.emulator.relays import BLEED, CHARGE, LOW, MID, REST, WORK

if TYPE_CHECKING:
    from dwellbench.emulator.world import World

Act = Callable[["World", Fault, bool], None]


def _lid_open(w: World, f: Fault, on: bool) -> None:
    w.lid.move(on, w.now_us)
    w.lid_moved(on, "the lid was forced")


def _stop(w: World, f: Fault, on: bool) -> None:
    w.stop_pressed = on


def _switch(w: World, f: Fault, on: bool) -> None:
    if on:
        w.lid.fault.switch[f.more["which"]] = f.more["level"] == "closed"
    else:
        w.lid.fault.switch.pop(f.more["which"], None)


def _lock(w: World, f: Fault, on: bool) -> None:
    position = f.more["position"]
    w.lid.fault.bolt_stays = on and position == "stays"
    w.lid.fault.bolt_at = position == "locked" if on and position != "stays" else None


def _weld(which: int, side: int) -> Act:
    def act(w: World, f: Fault, on: bool) -> None:
        if on:
            w.relays.welded[which] = side
        else:
            w.relays.welded.pop(which, None)
            w.relays.settle(which)

    return act


def _stick(which: int, position: int | None = None) -> Act:
    def act(w: World, f: Fault, on: bool) -> None:
        if not on:
            w.relays.stuck.discard(which)
            w.relays.settle(which)
            return
        w.relays.stuck.add(which)
        if position is not None:
            w.relays.position[which] = position

    return act


def _shunt(w: World, f: Fault, on: bool) -> None:
    which = LOW if f.more["which"] == "low" else MID
    _stick(which, {"stays": None, "rest": REST, "work": WORK}[f.more["position"]])(w, f, on)


def _path(name: str) -> Act:
    def act(w: World, f: Fault, on: bool) -> None:
        w.paths[name] = on

    return act


def _bleed(w: World, f: Fault, on: bool) -> None:
    w.paths["bleed_open" if f.more["which"] == 1 else "bleed2_open"] = on


def _dirt(w: World, f: Fault, on: bool) -> None:
    w.fixture_S = 1.0 / f.more["ohm"] if on else 0.0


def _divider(w: World, f: Fault, on: bool) -> None:
    # without its top leg the input is pulled to ground; without its bottom leg it rises to the node's volts
    which = f.more["which"]
    factor = 0.0 if f.more["leg"] == "top" else 1001.0
    w.divider_factor[which] = factor if on else 1.0
    if which == "part":
        w.paths["divider_open"] = on
    w.rewire()


def _divider_off(w: World, f: Fault, on: bool) -> None:
    w.divider_factor[f.more["which"]] = f.more["factor"] if on else 1.0
    w.rewire()


def _detector(w: World, f: Fault, on: bool) -> None:
    w.detector_stuck = f.more["level"] if on else None


def _silent(w: World, f: Fault, on: bool) -> None:
    w.silent[f.more["unit"]] = on
    w.chips_changed()


def _code(w: World, f: Fault, on: bool) -> None:
    w.stuck_code[f.more["unit"]] = f.more["code"] if on else None
    w.chips_changed()


def _reference(w: World, f: Fault, on: bool) -> None:
    w.reference_factor[f.more["unit"]] = 1.0 + f.more["fraction"] if on else 1.0
    w.rewire()


def _thermistor(volts: float) -> Act:
    def act(w: World, f: Fault, on: bool) -> None:
        w.thermistor_fixed_V = volts if on else None
        w.rewire()

    return act


def _warm(w: World, f: Fault, on: bool) -> None:
    w.warm_to(f.more["to_C"] if on else w.scenario.ambient_C, f.more["over_s"])


def _over(w: World, f: Fault, on: bool) -> None:
    w.supply.fault.by_V = f.more["by_V"] if on else 0.0
    w.supply.moving = True


def _stuck_on(w: World, f: Fault, on: bool) -> None:
    volts = f.more["volts"]
    if volts is None:  # where it stands, or would stand
        volts = w.circuit.s if w.supply.on else w.supply.target_V(w.now_us)
    w.supply.fault.stuck_V = volts if on else None
    w.supply.moving = True


def _dead(w: World, f: Fault, on: bool) -> None:
    w.supply.fault.dead = on
    w.supply.moving = True


def _drift(w: World, f: Fault, on: bool) -> None:
    w.supply.wander(w.now_us)
    w.supply.fault.drift_V_per_s = f.more["V_per_s"] if on else 0.0


def _enable(w: World, f: Fault, on: bool) -> None:
    w.supply.fault.always_enabled = on


def _part_leaks(w: World, f: Fault, on: bool) -> None:
    w.part.fault_S += (1.0 if on else -1.0) / f.more["ohm"]


def _part_opens(w: World, f: Fault, on: bool) -> None:
    w.part.broken_lead = on


def _hung(w: World, f: Fault, on: bool) -> None:
    w.controller_hung = on


def _reset(w: World, f: Fault, on: bool) -> None:
    if on:
        w.ask_reset()


def _power(w: World, f: Fault, on: bool) -> None:
    w.set_power(not on)


def _link(w: World, f: Fault, on: bool) -> None:
    w.link_silent = on


def _wrap(w: World, f: Fault, on: bool) -> None:
    """Nothing: the counter was set at power-up."""


def _jump(w: World, f: Fault, on: bool) -> None:
    if on:
        w.clock_offset_ms += f.more["by_ms"]


ACTS: dict[str, Act] = {
    "lid_open": _lid_open,
    "stop_pressed": _stop,
    "lid_switch_stuck": _switch,
    "lock_fails": _lock,
    "charge_relay_welded": _weld(CHARGE, WORK),
    "charge_relay_dead": _stick(CHARGE, REST),
    "charge_path_open": _path("charge_open"),
    "bleed_open": _bleed,
    "bleed_welded": _weld(BLEED, REST),
    "bleed_relay_stuck": _stick(BLEED),
    "shunt_relay_stuck": _shunt,
    "fixture_dirty": _dirt,
    "divider_open": _divider,
    "divider_off": _divider_off,
    "detector_stuck": _detector,
    "converter_silent": _silent,
    "converter_stuck": _code,
    "reference_off": _reference,
    "thermistor_open": _thermistor(1.0),
    "thermistor_shorted": _thermistor(0.0),
    "over_temperature": _warm,
    "supply_overvoltage": _over,
    "supply_stuck_on": _stuck_on,
    "supply_dead": _dead,
    "supply_drift": _drift,
    "enable_stuck": _enable,
    "part_shorts": _part_leaks,
    "part_leaks": _part_leaks,
    "part_opens": _part_opens,
    "controller_hung": _hung,
    "controller_reset": _reset,
    "power_lost": _power,
    "link_silent": _link,
    "clock_wrap": _wrap,
    "clock_jump": _jump,
}
