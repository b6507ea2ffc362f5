"""Numbers of the wire, made from firmware/wire.toml by generate.py: do not edit."""

# ruff: noqa: E501  # generated rows are as long as their data
# fmt: off
from __future__ import annotations

from enum import IntEnum
from typing import Any, Final

Fields = tuple[tuple[str, Any], ...]


class Op(IntEnum):
    """Code byte of each op."""

    END = 1
    FAIL = 2
    FAILING = 37
    HIGH = 3
    LINES = 4
    ADDRESS = 5
    STEP = 6
    ADDRESS_WORD = 7
    DRIVE = 8
    DRIVE_WORD = 9
    RELEASE = 10
    WAIT = 11
    PULSE = 12
    SAMPLE = 13
    KEEP = 14
    COMPARE = 15
    COMPARE_WORD = 16
    COMPARE_KEPT = 17
    SENSE = 18
    RAIL = 19
    RANGE = 20
    SWITCHES = 21
    BIAS = 22
    MEASURE = 23
    SEATED = 24
    GATE_LOOK = 25
    GATE = 26
    BRANCH = 27
    LOOP = 28
    NEXT = 29
    EACH_BLOCK = 30
    NEXT_BLOCK = 31
    EACH_WORD = 34
    NEXT_WORD = 35
    REPORT = 32
    POLL = 33
    OVER_PULSE = 36
    READ_RUN = 64
    SCAN = 65
    PULSE_VERIFY = 66
    BUS_WRITES = 67
    WRITE_POLL = 68
    PAGE_LOAD = 69


class Frame(IntEnum):
    """Kind byte of each frame."""

    DESCRIBE = 1
    PERMIT = 2
    LOAD = 3
    SEAL = 4
    RUN = 5
    STATUS = 6
    CLEAR = 7
    RATE = 8
    ECHO = 9
    KEEP_ALIVE = 10
    BLOCK = 16
    HEARTBEAT = 64
    ANSWER = 65
    BLOCK_DONE = 66
    BLOCK_DATA = 67
    BLOCK_REFUSED = 68


class Outcome(IntEnum):
    """How a command ended."""

    DONE = 0
    FAILED = 1
    TRIPPED = 2
    REFUSED = 3
    ABORTED = 4


class State(IntEnum):
    """State of the rig."""

    IDLE = 0
    PERMIT = 1
    SEALED = 2
    RUNNING = 3
    SAFE = 4


class Fault(IntEnum):
    """Code of a trip or a refusal."""

    NONE = 0
    FAILED = 1
    ABORTED = 2
    DEAD_MAN = 3
    MEASURED_OUTSIDE = 4
    VCC_OUTSIDE = 5
    RAISED_OUTSIDE = 6
    WRONG_ID = 7
    NO_ID_MODE = 8
    STILL_RAISED = 9
    STILL_POWERED = 10
    GATE_SHUT = 11
    NOT_IN_PERMIT = 12
    ABOVE_CEILING = 13
    NO_VCC = 14
    BUS_CONFLICT = 15
    LINE_AT_RAISED = 16
    DRIVEN_TOO_LOW = 17
    BIAS_REFUSED = 18
    NOT_SEATED = 19
    NOT_MEASURED = 20
    UNKNOWN_OP = 32
    BAD_ARGUMENT = 33
    NO_END = 34
    BAD_NESTING = 35
    TOO_LONG = 36
    PULSE_WITHOUT_END = 37
    BAD_CRC = 38
    BAD_PERMIT = 39
    WRONG_STATE = 40
    WRONG_BOOT = 41
    WRONG_PERMIT = 42
    BAD_FRAME = 43
    TOO_MANY_WORDS = 44
    BAD_BLOCK = 45
    LATCHED = 46


class Fail(IntEnum):
    """Why a `fail` op ended the sequence."""

    SEAT_STANDS_UP = 1
    SEAT_DATA_LOW = 2
    SEAT_DATA_HIGH = 3
    SEAT_FLOATING = 4
    SEAT_OTHER_POWER = 5
    ERASE = 16
    PROGRAM = 17
    POLL = 18
    NOT_BLANK = 19


class Identity(IntEnum):
    """What the gate wants."""

    WANTED = 1
    VOUCHED_NONE = 2
    NONE = 3


class Flow(IntEnum):
    """What the blocks of a sequence carry."""

    NONE = 0
    READ = 1
    WRITE = 2


class Level(IntEnum):
    """State of a line."""

    LOW = 0
    HIGH = 1
    RELEASED = 2


class Rail(IntEnum):
    """The rails."""

    VCC = 0
    RAISED = 1


class Range(IntEnum):
    """VCC's way to the socket."""

    OFF = 0
    PROBE = 1
    FULL = 2


class Bias(IntEnum):
    """A weak pull."""

    OFF = 0
    DOWN = 1
    UP = 2


class Group(IntEnum):
    """Line groups of a bias, one bit each."""

    DATA = 1
    ADDRESS = 2
    POWER = 4


class Channel(IntEnum):
    """Converter inputs; POSITION + n is raised switch n."""

    VCC_RAIL = 0
    RAISED_RAIL = 1
    SOCKET_VCC = 2
    POSITION = 16


class PollKind(IntEnum):
    """What a poll waits for."""

    DATA_BIT_7 = 0
    TOGGLE_6 = 1
    EQUAL = 2
    TOGGLE_6_LIMIT_5 = 3


FINGERPRINT: Final = 0xE564AC5F
LAYOUT: Final = 1
ABORT_RUN: Final = 4
HELLO_BAUD: Final = 38400
HELLO_REQUEST: Final = b'\x00PW?\r\x00'
HELLO_MAGIC: Final = b'PWr1'
HELLO_LENGTH: Final = 32
HELLO_FIELDS: Final[Fields] = (('layout', 'u8'), ('window_blocks', 'u8'), ('receive_bytes', 'u16'), ('fingerprint', 'u32'), ('boot', 'u32'), ('fault', 'u8'), ('fault_op', 'u8'), ('fault_pc', 'u16'), ('fault_tick', 'u32'), ('fault_got', 'u16'), ('fault_low', 'u16'))
HEADER_VERSION: Final = 1
HEADER_LAYOUT: Final[Fields] = (('version', 'u8'), ('width', 'u8'), ('flow', 'u8'), ('passes', 'u8'), ('address', 'u8*'), ('words', 'u32'), ('block_words', 'u16'))
PERMIT_LAYOUT: Final[Fields] = (('number', 'u16'), ('boot', 'u32'), ('identity', 'u8'), ('alternatives', (('cells', (('at', 'u32'), ('is', 'u16'))),)), ('identify_switch', 'u8'), ('identify_step', 'u8'), ('identify_ceiling', 'u16'), ('raised', (('switch', 'u8'), ('ceiling', 'u16'))), ('vcc', (('step', 'u8'), ('low', 'u16'), ('high', 'u16'), ('settle', 'u32'))), ('vcc_to', 'u8'), ('drives', (('lines', 'u8*'),)), ('safe', 'u8*'), ('self_timed', 'u32'), ('crc32', 'u32'))
PROGRAM_BYTES: Final = 1024
LOOP_DEPTH: Final = 3
BLOCK_BYTES: Final = 512
ID_ALTERNATIVES: Final = 8
ID_CELLS: Final = 4
LOOK_CELLS: Final = 64
READINGS: Final = 16
HISTOGRAM: Final = 32
LOAD_BYTES: Final = 200
DRIVE_PATTERNS: Final = 8
HEARTBEAT_MS: Final = 250
FIRST_ANSWER_MS: Final = 50
DEAD_MAN_MS: Final = 500
RATE_FALL_BACK_MS: Final = 500
MONITOR_MS: Final = 1
CONVERTER_OFF_MS: Final = 100

OP_ARGS: Final[dict[Op, Fields]] = {
    Op.END: (),
    Op.FAIL: (('why', 'u8'),),
    Op.FAILING: (('why', 'u8'),),
    Op.HIGH: (('how', 'u8'),),
    Op.LINES: (('lines', 'u8*'),),
    Op.ADDRESS: (('at', 'u32'),),
    Op.STEP: (('by', 'i8'),),
    Op.ADDRESS_WORD: (),
    Op.DRIVE: (('word', 'u16'),),
    Op.DRIVE_WORD: (),
    Op.RELEASE: (),
    Op.WAIT: (('ticks', 'u32'),),
    Op.PULSE: (('line', 'u8'), ('width', 'u32'), ('max', 'u32')),
    Op.SAMPLE: (),
    Op.KEEP: (),
    Op.COMPARE: (('word', 'u16'), ('mask', 'u16')),
    Op.COMPARE_WORD: (),
    Op.COMPARE_KEPT: (('mask', 'u16'),),
    Op.SENSE: (('line', 'u8'), ('is', 'u8')),
    Op.RAIL: (('rail', 'u8'), ('step', 'u8')),
    Op.RANGE: (('which', 'u8'),),
    Op.SWITCHES: (('on', 'u8'),),
    Op.BIAS: (('groups', 'u8'), ('how', 'u8')),
    Op.MEASURE: (('channel', 'u8'), ('low', 'u16'), ('high', 'u16'), ('limit', 'u32')),
    Op.SEATED: (),
    Op.GATE_LOOK: (('wait', 'u32'),),
    Op.GATE: (('wait', 'u32'),),
    Op.BRANCH: (('when', 'u8'), ('depth', 'u8'), ('to', 'u16')),
    Op.LOOP: (('count', 'u16'),),
    Op.NEXT: (),
    Op.EACH_BLOCK: (('to', 'u16'),),
    Op.NEXT_BLOCK: (),
    Op.EACH_WORD: (('to', 'u16'),),
    Op.NEXT_WORD: (),
    Op.REPORT: (),
    Op.POLL: (('kind', 'u8'), ('enable', 'u8*'), ('access', 'u32'), ('disable', 'u8*'), ('gap', 'u32'), ('mantissa', 'u8'), ('exponent', 'u8')),
    Op.OVER_PULSE: (('line', 'u8'), ('unit', 'u32'), ('factor', 'u8'), ('max', 'u32')),
    Op.READ_RUN: (('wait', 'u32'),),
    Op.SCAN: (('first', 'u32'), ('count', 'u32'), ('word', 'u16'), ('wait', 'u32')),
    Op.PULSE_VERIFY: (('tries', 'u16'), ('switches', 'u8'), ('setup', 'u32'), ('line', 'u8'), ('width', 'u32'), ('max', 'u32'), ('hold', 'u32'), ('fall', 'u32'), ('recover', 'u32'), ('enable', 'u8*'), ('access', 'u32'), ('disable', 'u8*'), ('float', 'u32'), ('factor', 'u8'), ('over_max', 'u32')),
    Op.BUS_WRITES: (('strobe', 'u8'), ('setup', 'u32'), ('width', 'u32'), ('hold', 'u32'), ('cycles', 'cycle*')),
    Op.WRITE_POLL: (('strobe', 'u8'), ('setup', 'u32'), ('width', 'u32'), ('hold', 'u32'), ('kind', 'u8'), ('enable', 'u8*'), ('access', 'u32'), ('disable', 'u8*'), ('gap', 'u32'), ('mantissa', 'u8'), ('exponent', 'u8')),
    Op.PAGE_LOAD: (('strobe', 'u8'), ('setup', 'u32'), ('width', 'u32'), ('hold', 'u32')),
}
OP_COST: Final[dict[Op, int]] = {
    Op.END: 4,
    Op.FAIL: 4,
    Op.FAILING: 4,
    Op.HIGH: 4,
    Op.LINES: 4,
    Op.ADDRESS: 4,
    Op.STEP: 4,
    Op.ADDRESS_WORD: 4,
    Op.DRIVE: 4,
    Op.DRIVE_WORD: 4,
    Op.RELEASE: 4,
    Op.WAIT: 4,
    Op.PULSE: 4,
    Op.SAMPLE: 4,
    Op.KEEP: 4,
    Op.COMPARE: 4,
    Op.COMPARE_WORD: 4,
    Op.COMPARE_KEPT: 4,
    Op.SENSE: 4,
    Op.RAIL: 4,
    Op.RANGE: 4,
    Op.SWITCHES: 4,
    Op.BIAS: 4,
    Op.MEASURE: 1600,
    Op.SEATED: 4,
    Op.GATE_LOOK: 16,
    Op.GATE: 16,
    Op.BRANCH: 4,
    Op.LOOP: 4,
    Op.NEXT: 4,
    Op.EACH_BLOCK: 4,
    Op.NEXT_BLOCK: 4,
    Op.EACH_WORD: 4,
    Op.NEXT_WORD: 4,
    Op.REPORT: 4,
    Op.POLL: 8,
    Op.OVER_PULSE: 4,
    Op.READ_RUN: 4,
    Op.SCAN: 4,
    Op.PULSE_VERIFY: 4,
    Op.BUS_WRITES: 4,
    Op.WRITE_POLL: 4,
    Op.PAGE_LOAD: 4,
}
FRAME_FIELDS: Final[dict[Frame, Fields]] = {
    Frame.DESCRIBE: (('page', 'u8'),),
    Frame.PERMIT: (('permit', 'bytes'),),
    Frame.LOAD: (('offset', 'u16'), ('code', 'bytes')),
    Frame.SEAL: (),
    Frame.RUN: (),
    Frame.STATUS: (),
    Frame.CLEAR: (),
    Frame.RATE: (('baud', 'u32'),),
    Frame.ECHO: (('data', 'bytes'),),
    Frame.KEEP_ALIVE: (),
    Frame.BLOCK: (('first', 'u32'), ('words', 'u16'), ('data', 'bytes')),
    Frame.HEARTBEAT: (('state', 'u8'), ('ticks', 'u32')),
    Frame.ANSWER: (('outcome', 'u8'), ('data', 'bytes')),
    Frame.BLOCK_DONE: (('words', 'u16'), ('worst', 'u32'), ('worst_tries', 'u16'), ('failed', 'u32'), ('histogram', 'bytes')),
    Frame.BLOCK_DATA: (('data', 'bytes'),),
    Frame.BLOCK_REFUSED: (('wanted', 'u16'),),
}
BLOBS: Final[dict[str, Fields]] = {
    'fault': (('code', 'u8'), ('op', 'u8'), ('pc', 'u16'), ('tick', 'u32'), ('got', 'u16'), ('low', 'u16'), ('high', 'u16'), ('address', 'u32'), ('sample', 'u16'), ('kept', 'u16'), ('pulsing', 'u8')),
    'run_done': (('matched', 'u8'), ('blocks', 'u16'), ('words', 'u32'), ('tries', 'u16')),
    'run_tail': (('id', 'u8*'), ('readings', 'bytes')),
    'status': (('state', 'u8'), ('gate', 'u8'), ('damaged', 'u16'), ('dropped', 'u16'), ('repeated', 'u16'), ('boot', 'u32')),
    'describe': (('board', 'u8*'), ('window_blocks', 'u8'), ('block_bytes', 'u16'), ('program_bytes', 'u16'), ('receive_bytes', 'u16'), ('driven_from', 'u16'), ('off_below', 'u16'), ('clear_above_vcc', 'u16'), ('fall_limit', 'u32'), ('off_limit', 'u32'), ('lines', 'u8'), ('data_lines', 'u8*'), ('rails', 'u8'), ('steps', 'u8'), ('switches', 'u8*'), ('vcc_switches', 'u8*'), ('top_baud', 'u32')),
}
