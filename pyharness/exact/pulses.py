"""Stage 11: the command as widths of pulses in ticks of the timer."""

from __future__ import annotations

from pyharness.exact.constants import MRD_S_SHORT_PULSE_X, MRD_S_SHORT_PULSE_Y, MRD_S_SHORT_PULSE_Z
from pyharness.exact.num import Record, Vector, bit, select, with_sign
from pyharness.exact.ranges import check, check3


def width(config: Record, command: int) -> tuple[int, bool]:
    """Width of one axis's pulse in ticks, and whether it was too short and dropped.

    At most the window, met at the limit.
    """
    product = check("pulses.product", abs(command) * config["window_ticks"])
    ticks = check("pulses.width", (product + 2**14) >> 15)
    short = 0 < ticks < config["shortest_ticks"]
    return select(short, 0, ticks), short


def make_pulses(config: Record, command: Vector) -> tuple[Record, int]:
    """Signed ticks of coil current. Returns the trace's part and the status bits."""
    x, y, z = command
    px, py, pz = config["polarity"]
    nx, short_x = width(config, x)
    ny, short_y = width(config, y)
    nz, short_z = width(config, z)
    ticks = (with_sign(nx, x) * px, with_sign(ny, y) * py, with_sign(nz, z) * pz)
    status = (
        bit(short_x, MRD_S_SHORT_PULSE_X)
        | bit(short_y, MRD_S_SHORT_PULSE_Y)
        | bit(short_z, MRD_S_SHORT_PULSE_Z)
    )
    return {"ticks": check3("pulses.ticks", ticks)}, status
