"""States, stages, faults, ends, errors and bits, generated from protocol/codes.json by protocol/make_codes.py."""

from .compat import const

PROTOCOL_MAJOR = const(1)
PROTOCOL_MINOR = const(0)

# states
WAKING = const(0)
REST = const(1)
CHARGE = const(2)
DWELL = const(3)
MEASURE = const(4)
DISCHARGE = const(5)
VERIFY = const(6)
RECOVERY = const(7)
FORM = const(8)
LOCKOUT = const(9)
STATES = (
    "waking",
    "rest",
    "charge",
    "dwell",
    "measure",
    "discharge",
    "verify",
    "recovery",
    "form",
    "lockout",
)

# stages
ST_IDLE = const(0)
ST_ZERO = const(1)
ST_PROVE = const(2)
ST_LOOK = const(3)
ST_EMPTY = const(4)
ST_CHARGE = const(5)
ST_DWELL = const(6)
ST_MEASURE = const(7)
ST_DISCHARGE = const(8)
ST_VERIFY = const(9)
ST_RECOVERY = const(10)
ST_FORM = const(11)
STAGES = (
    "idle",
    "zero",
    "prove",
    "look",
    "empty",
    "charge",
    "dwell",
    "measure",
    "discharge",
    "verify",
    "recovery",
    "form",
)

# ends
END_COMPLETE = const(0)
END_FINISHED = const(1)
END_SHORT = const(2)
END_OPEN = const(3)
END_REVERSED = const(4)
END_VALUE_OFF = const(5)
END_RESIDUAL = const(6)
END_ABORTED = const(7)
END_LINK_LOST = const(8)
END_FAULT = const(9)
END_OVER_ENERGY = const(10)
ENDS = (
    "complete",
    "finished",
    "short",
    "open",
    "reversed",
    "value_off",
    "residual",
    "aborted",
    "link_lost",
    "fault",
    "over_energy",
)

# faults
FAULT_NONE = const(0)
FAULT_LID_OPEN = const(1)
FAULT_LID_SWITCHES = const(2)
FAULT_STOP = const(3)
FAULT_LOCK = const(4)
FAULT_DETECTOR = const(5)
FAULT_DIVIDER = const(6)
FAULT_SUPPLY = const(7)
FAULT_SUPPLY_OVER = const(8)
FAULT_SUPPLY_ON = const(9)
FAULT_OVER_VOLTAGE = const(10)
FAULT_OVER_CURRENT = const(11)
FAULT_CHARGE_TIMEOUT = const(12)
FAULT_NO_RISE = const(13)
FAULT_OVER_TEMPERATURE = const(14)
FAULT_THERMISTOR = const(15)
FAULT_CONVERTER_SILENT = const(16)
FAULT_CONVERTER_STUCK = const(17)
FAULT_CLOCK = const(18)
FAULT_WAY_DOWN = const(19)
FAULT_SECOND_BLEED = const(20)
FAULT_BLEED_SLOW = const(21)
FAULT_CHARGE_LEFT = const(22)
FAULT_REBOUND = const(23)
FAULT_SETTINGS = const(24)
FAULT_RESET_IN_RUN = const(25)
FAULT_ILLEGAL_MOVE = const(26)
FAULT_NOT_DISCHARGED = const(27)
FAULT_BOARD = const(28)
FAULT_SHUNT = const(29)
FAULTS = (
    "none",
    "lid_open",
    "lid_switches",
    "stop",
    "lock",
    "detector",
    "divider",
    "supply",
    "supply_over",
    "supply_on",
    "over_voltage",
    "over_current",
    "charge_timeout",
    "no_rise",
    "over_temperature",
    "thermistor",
    "converter_silent",
    "converter_stuck",
    "clock",
    "way_down",
    "second_bleed",
    "bleed_slow",
    "charge_left",
    "rebound",
    "settings",
    "reset_in_run",
    "illegal_move",
    "not_discharged",
    "board",
    "shunt",
)

# channels
CH_PART = const(0)
CH_SUPPLY = const(1)
CH_THERMISTOR = const(2)
CH_REFERENCE_A = const(3)
CH_SHUNT = const(4)
CH_REFERENCE_B = const(5)

# inputs
IN_LID_A = const(1)
IN_LID_B = const(2)
IN_STOP = const(4)
IN_HV = const(8)
IN_LOCKED = const(16)

# outputs
OUT_BLEED_OPEN = const(1)
OUT_CHARGE = const(2)
OUT_MID_SHUNT = const(4)
OUT_LOW_OPEN = const(8)
OUT_RELEASE = const(16)
OUT_NOTICE = const(32)

# flags
FLAG_UNSETTLED = const(1)
FLAG_RAMP = const(2)
FLAG_SHORT_WINDOW = const(4)
FLAG_V_CLIPPED = const(8)

# errors
E_PARSE_ERROR = const(-32700)
E_INVALID_REQUEST = const(-32600)
E_METHOD_NOT_FOUND = const(-32601)
E_INVALID_PARAMS = const(-32602)
E_INTERNAL_ERROR = const(-32603)
E_BAD_CRC = const(-32000)
E_LINE_TOO_LONG = const(-32001)
E_CRC_REQUIRED = const(-32002)
E_NOT_NOW = const(-32010)
E_LID = const(-32011)
E_LID_MUST_BE_OPEN = const(-32012)
E_BEYOND_RATING = const(-32013)
E_LOCKED_OUT = const(-32014)
E_NOT_SAFE = const(-32015)
E_UNSUPPORTED = const(-32016)
E_BUSY = const(-32017)
E_STOP_PRESSED = const(-32018)
E_SETTINGS = const(-32019)
E_HARDWARE = const(-32020)

ERRORS = {
    -32700: "Parse error",
    -32600: "Invalid Request",
    -32601: "Method not found",
    -32602: "Invalid params",
    -32603: "Internal error",
    -32000: "Bad crc",
    -32001: "Line too long",
    -32002: "This method needs a crc",
    -32010: "Not in this state",
    -32011: "The lid is not closed",
    -32012: "The lid must be open",
    -32013: "Beyond the box's rating",
    -32014: "Locked out",
    -32015: "Discharge is not proven",
    -32016: "Not supported by this firmware",
    -32017: "A run is under way",
    -32018: "The stop button is pressed",
    -32019: "Settings refused",
    -32020: "The box's own check failed",
}
