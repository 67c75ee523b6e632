"""The seam between the firmware's logic and whatever it runs on.

A board has exactly the methods below. The reference board (`board_rp2`), the emulated boards and the boards of tests all
provide them; the controller knows nothing else of the hardware. None of them may block longer than it says here, for the
interlock waits while they do.

Worst-case latency from an input's change to the outputs: the change is read at the next period (5 ms) and the outputs are
written in that same period, so it is one period plus the step's own time, inside the two periods the design allows.

    now_ms()                            Return the free-running millisecond count, 0 to 2**30 - 1, which wraps.
    wait_period()                       Return at the next 5 ms tick.
    inputs()                            Return the raw input levels as the bits of the code table.
    convert(unit, channel, full_scale)  Start one conversion of `channel` on converter `unit` (0 or 1) at full scale WIDE or FINE.
    code(unit)                          Return the result of the conversion started last on `unit`: -32768 to 32767, or NO_CODE.
    outputs(bits)                       Set the relay coils, the lock's release and the buzzer. Called every period.
    supply_mv(mv)                       Set the supply's voltage. Says nothing of whether it is enabled.
    pump()                              Toggle the supply enable once. Not toggled for 50 ms, the supply is off in hardware.
    feed()                              Feed the watchdog. Not fed for 2 s, the controller is reset.
    get()                               Return the next byte from the link, or -1 when there is none.
    room()                              Return how many bytes `put()` takes now without waiting.
    put(byte)                           Send one byte. Called only while `room()` says so.
    keep(name, data)                    Write `data` to flash under `name`. May pause for tens of milliseconds: only with discharge proven.
    kept(name)                          Return what was kept under `name`, or None.
    scratch()                           Return the 24-bit number that survives a reset but not a power cut.
    set_scratch(value)                  Set that number, 0 to 2**24 - 1. Costs no time.
    cause()                             Return CAUSE_POWER or CAUSE_RESET.
    unique_id()                         Return sixteen lower-case hexadecimal digits.
    restart_plain()                     Restart into the plain interpreter with safe levels, without controller and watchdog.
"""

from .compat import const

# What `code()` gives when the chip did not answer. Outside the range of a 16-bit code, so it cannot be a reading.
NO_CODE = const(40000)

# Why the controller started.
CAUSE_POWER = const(0)
CAUSE_RESET = const(1)

# Full scales of `convert()`: 0 is +/-1.024 V, 1 is +/-0.256 V.
WIDE = const(0)
FINE = const(1)


class Board:
    """What every board inherits. The table above is the seam; a test holds each board to it."""

    # None on hardware; an emulated board has {"time_scale": "1"} (virtual seconds a wall second).
    emulation = None
