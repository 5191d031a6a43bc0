"""Reads sealed readings of a ledger, written from the section "The layout of a sealed hour" in DEVELOPERS.md alone.

usage: read_sealed.py LEDGER POINT_ID   prints seq,t_ms,mv_uv,temp_mc,value_u,u_u,calibration_id,flags per row, by part
Needs Python and the command `zstd`; nothing of halfcell.
"""

import hashlib
import sqlite3
import subprocess
import sys


class Bytes:
    def __init__(self, data):
        self.data, self.at = data, 0

    def take(self, n):
        piece = self.data[self.at : self.at + n]
        assert len(piece) == n, "the blob ends too early"
        self.at += n
        return piece

    def varint(self):
        number, shift = 0, 0
        while True:
            byte = self.take(1)[0]
            number |= (byte & 0x7F) << shift
            shift += 7
            if byte < 0x80:
                return number

    def signed(self):
        number = self.varint()
        return number // 2 if number % 2 == 0 else -(number // 2) - 1


def column(data, n, is_time):
    kind = data.take(1)[0]
    if kind == 2:
        return [None] * n
    there = [True] * n
    if kind == 1:
        bits = data.take((n + 7) // 8)
        there = [bool(bits[i // 8] >> (i % 8) & 1) for i in range(n)]
    else:
        assert kind == 0, f"unknown kind of column {kind}"
    figures = [data.signed()]
    step, slope = data.varint(), 0
    for _ in range(sum(there) - 1):
        difference = data.signed() * step if step else 0
        if is_time:
            slope += difference
            difference = slope
        figures.append(figures[-1] + difference)
    figures = iter(figures)
    return [next(figures) if is_there else None for is_there in there]


def rows(blob):
    plain = subprocess.run(["zstd", "-dc"], input=blob, capture_output=True, check=True).stdout
    data = Bytes(plain)
    n = data.varint()
    columns = [column(data, n, number == 1) for number in range(8)]
    assert data.at == len(plain), "the blob goes on too long"
    return zip(*columns)


ledger = sqlite3.connect(f"file:{sys.argv[1]}?mode=ro", uri=True)
for data, sha256, codec in ledger.execute(
    "SELECT data, sha256, codec FROM sealed WHERE point_id = ? ORDER BY hour, part", [sys.argv[2]]
):
    assert codec == 1 and hashlib.sha256(data).digest() == sha256
    for row in rows(data):
        print(",".join("" if figure is None else str(figure) for figure in row))
