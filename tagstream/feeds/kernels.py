"""Kernels of the feeds: bytes to ticks and inputs.

They see arrays and integers only and fill arrays that the caller owns. Each has a slow twin in
tests/naive.py.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel

INT64_MAX = 2**63 - 1

# Slots of the state of `fill_decoded`, int64.
EPOCH, KEPT, GAP, LAST = range(4)
STATE_SIZE = 4
NO_LAST = -1  # in LAST: no tag came yet
# Rows of its table of fields.
TIME, CHANNEL, FINE = range(3)
# Its columns: value = (low >> shift_low & mask_low) | (high >> shift_high & mask_high) << up.
# FACTOR: ticks in a count, signed. RANGE, of the time: counts after which it begins again
# without a marker, or 0.
SHIFT_LOW, MASK_LOW, SHIFT_HIGH, MASK_HIGH, UP, FACTOR, RANGE = range(7)
# Columns of its table of markers; a field follows from COUNT on.
MEANING, BITS_LOW, VALUE_LOW, BITS_HIGH, VALUE_HIGH, STEP, ONCE, COUNT = range(8)
ROLLOVER, LOST, SKIP = range(3)


@kernel
def fill_words(
    raw: NDArray[np.uint8],
    record_bytes: int,
    big_endian: bool,
    low: NDArray[np.int64],
    high: NDArray[np.int64],
) -> None:
    """Records as integers of 128 bits, in two halves.

    raw: n * record_bytes bytes. record_bytes: 1 to 16. low, high: int64, n; bits 0 to 63 and 64
    to 127 of each record. Cost: one pass.
    """
    for i in range(low.size):
        halves_low = np.int64(0)
        halves_high = np.int64(0)
        for k in range(record_bytes):
            place = record_bytes - 1 - k if big_endian else k
            byte = np.int64(raw[i * record_bytes + place])
            if k < 8:
                halves_low |= byte << np.int64(8 * k)
            else:
                halves_high |= byte << np.int64(8 * (k - 8))
        low[i] = halves_low
        high[i] = halves_high


@kernel
def _field_value(low: np.int64, high: np.int64, field: NDArray[np.int64]) -> np.int64:
    """The unsigned value, at most 63 bits, of a field of a record. field: int64, from 5 on."""
    part: np.int64 = (low >> field[SHIFT_LOW]) & field[MASK_LOW]
    rest: np.int64 = (high >> field[SHIFT_HIGH]) & field[MASK_HIGH]
    value: np.int64 = part | (rest << field[UP])
    return value


@kernel
def _scaled(count: np.int64, factor: np.int64, fine: np.int64) -> np.int64:
    """count * factor + fine within +-(2**63 - 1); a count that is not stays so. |fine| < 2**62."""
    most = np.int64(INT64_MAX)
    reach = (most >> np.int64(1)) // factor
    if -reach <= count <= reach:
        return count * factor + fine
    if count == most or count > (most - max(fine, np.int64(0))) // factor:
        return most
    if count < -((most + min(fine, np.int64(0))) // factor):
        return -most
    return count * factor + fine


@kernel
def fill_decoded(
    low: NDArray[np.int64],
    high: NDArray[np.int64],
    fields: NDArray[np.int64],
    markers: NDArray[np.int64],
    state: NDArray[np.int64],
    ticks: NDArray[np.int64],
    inputs: NDArray[Any],
) -> int:
    """Decode records up to the first gap that has tags before it; return how many were used.

    low, high: int64, n; the halves of each record; `high` may be empty where records are no
    longer than 8 bytes. fields: int64, 3 x 7, time, channel and fine time. markers: int64, m x 12;
    the first that matches a record says what it means, and a record that matches none is a tag.
    state: [epoch, tags written by this call, whether a gap comes before them, count of the last
    tag]; all but the second are carried from call to call. ticks, inputs: at least n long.

    Epoch and time are counts of the time field until they are added. Without markers a count
    is taken to be less than half the range from the last one, so the epoch moves by a range
    forwards, or back when a tag of before the wrap comes late. A sum past int64 stays at
    2**63 - 1; fine times reach no further than 2**62. Cost: one pass.
    """
    most = np.int64(INT64_MAX)
    factor = fields[TIME, FACTOR]
    fine_factor = fields[FINE, FACTOR]
    span = fields[TIME, RANGE]
    epoch = state[EPOCH]
    last = state[LAST]
    kept = 0
    used = low.size
    for i in range(low.size):
        upper = high[i] if high.size else np.int64(0)
        meaning = -1
        for m in range(markers.shape[0]):
            row = markers[m]
            if (low[i] & row[BITS_LOW]) == row[VALUE_LOW] and (upper & row[BITS_HIGH]) == row[
                VALUE_HIGH
            ]:
                meaning = row[MEANING]
                if meaning == ROLLOVER:
                    count = row[ONCE] + _field_value(low[i], upper, row[COUNT:])
                    if count > 0:
                        room = (most - epoch) // count
                        epoch = most if row[STEP] > room else epoch + count * row[STEP]
                break
        if meaning == -1:
            time = _field_value(low[i], upper, fields[TIME])
            if span > 0:
                if last != NO_LAST and last - time > span // 2:
                    epoch = epoch + span if epoch <= most - span else most
                elif last != NO_LAST and time - last > span // 2:
                    epoch = epoch - span if epoch >= span - most else -most
                last = time
            tick = most if time > most - epoch and epoch > 0 else epoch + time
            if fine_factor != 0:
                fine = fine_factor * _field_value(low[i], upper, fields[FINE])
                tick = _scaled(tick, factor, fine)
            ticks[kept] = tick
            inputs[kept] = _field_value(low[i], upper, fields[CHANNEL])
            kept += 1
        elif meaning == LOST:
            if kept > 0:
                used = i
                break
            state[GAP] = 1
    state[EPOCH] = epoch
    state[KEPT] = kept
    state[LAST] = last
    return used


# Slots of the result of `fill_rows`, int64.
POSITION, LINES, BROKEN = range(3)
RESULT_SIZE = 3
NEWLINE, RETURN, SPACE, TAB, QUOTE, PLUS, MINUS, ZERO = 10, 13, 32, 9, 34, 43, 45, 48
LARGEST_INPUT = 65535


@kernel
def fill_rows(
    text: NDArray[np.uint8],
    shape: NDArray[np.int64],
    ticks: NDArray[np.int64],
    inputs: NDArray[np.uint16],
    result: NDArray[np.int64],
) -> int:
    """Read two columns of integers from lines of delimited text; return the number of rows.

    text: whole lines, the last byte a newline. shape: int64 [delimiter, columns in a line, time
    column, channel column]. ticks, inputs: of equal length; reading stops when they are full.
    result: int64 [bytes used, lines used, whether the next line is broken]. Empty lines are
    passed over. A line is broken when it has another number of columns, its time is no integer
    within int64 or its channel none of 0 to 65535. Cost: two passes.
    """
    position = 0
    lines = 0
    rows = 0
    result[BROKEN] = 0
    while position < text.size and rows < ticks.size:
        end = position
        while text[end] != NEWLINE:
            end += 1
        stop = end - 1 if end > position and text[end - 1] == RETURN else end
        if _trimmed(text, position, stop)[0] < stop:
            good, tick, number = _row_of(text, position, stop, shape)
            if not good:
                result[BROKEN] = 1
                break
            ticks[rows] = tick
            inputs[rows] = np.uint16(number)
            rows += 1
        lines += 1
        position = end + 1
    result[POSITION] = position
    result[LINES] = lines
    return rows


@kernel
def _row_of(
    text: NDArray[np.uint8], begin: int, end: int, shape: NDArray[np.int64]
) -> tuple[bool, np.int64, np.int64]:
    """(whether the line text[begin:end] is as it should be, its time, its channel)."""
    column = 0
    tick = np.int64(0)
    number = np.int64(0)
    good = True
    while begin <= end:
        stop = begin
        quoted = False
        while stop < end and (quoted or text[stop] != shape[0]):
            quoted ^= text[stop] == QUOTE
            stop += 1
        if column == shape[2]:
            whole, tick = _integer_of(text, begin, stop)
            good = good and whole
        if column == shape[3]:
            whole, number = _integer_of(text, begin, stop)
            good = good and whole and bool(0 <= number <= LARGEST_INPUT)
        column += 1
        begin = stop + 1
    return good and column == shape[1], tick, number


@kernel
def _integer_of(text: NDArray[np.uint8], begin: int, end: int) -> tuple[bool, np.int64]:
    """(whether text[begin:end] is an integer within +-(2**63 - 1), its value).

    Spaces around it, quotes around that, and a sign are allowed.
    """
    begin, end = _trimmed(text, begin, end)
    if end - begin >= 2 and text[begin] == QUOTE and text[end - 1] == QUOTE:
        begin, end = begin + 1, end - 1
    negative = begin < end and text[begin] == MINUS
    if begin < end and (text[begin] == MINUS or text[begin] == PLUS):
        begin += 1
    value = np.int64(0)
    for i in range(begin, end):
        digit = np.int64(text[i]) - ZERO
        if digit < 0 or digit > 9 or value > INT64_MAX // 10:
            return False, np.int64(0)
        if value == INT64_MAX // 10 and digit > INT64_MAX % 10:
            return False, np.int64(0)
        value = value * 10 + digit
    return begin < end, -value if negative else value


@kernel
def _trimmed(text: NDArray[np.uint8], begin: int, end: int) -> tuple[int, int]:
    """Begin and end of text[begin:end] without spaces at its ends."""
    while begin < end and (text[begin] == SPACE or text[begin] == TAB):
        begin += 1
    while end > begin and (text[end - 1] == SPACE or text[end - 1] == TAB):
        end -= 1
    return begin, end
