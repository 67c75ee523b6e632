"""How a sample lies in the ring: 28 bytes, little-endian, read by the table of its fields or by `struct`.

    0 kind | vrange << 3 | stage << 4   1 shunt | range << 2 | flags << 4   2 t (4)   6 sum of the part's readings (4)
    10 sum of the shunt's readings (4)   14 part: least, greatest (2 each)   18 shunt: least, greatest   22 supply   24 thermistor
    26 number of the part's readings | of the shunt's << 5 | of those clipped << 10

A window has at most 20 readings, and two minutes of rows are the largest thing on the heap.
"""

import struct

FORM = "<BBiiihhhhhhH"
SIZE = struct.calcsize(FORM)

# For each number of a row, in its order on the wire: offset, shift and mask of a word of two bytes. Mask 0: a signed number of
# two bytes, or of four where the shift is 1.
FIELDS = (
    b"\x02\x01\x00"  # t
    b"\x00\x04\x0f"  # stage
    b"\x01\x00\x03"  # shunt
    b"\x01\x02\x01"  # range of the shunt's readings
    b"\x1a\x00\x1f"  # of the part: how many readings,
    b"\x06\x01\x00"  # their sum,
    b"\x0e\x00\x00"  # least,
    b"\x10\x00\x00"  # greatest
    b"\x1a\x05\x1f"  # of the shunt: how many readings,
    b"\x0a\x01\x00"  # their sum,
    b"\x12\x00\x00"  # least,
    b"\x14\x00\x00"  # greatest,
    b"\x1a\x0a\x3f"  # how many of them clipped
    b"\x16\x00\x00"  # supply
    b"\x18\x00\x00"  # thermistor
    b"\x01\x04\x0f"  # flags
    b"\x00\x03\x01"  # range of the part's readings
)
