# Reports and decoded places through the emitted module, on standard output: of every pixel in every
# n-th row.
import sys

import t

out = bytearray()
for v in range(0, int(sys.argv[2]), int(sys.argv[3])):
    for u in range(int(sys.argv[1])):
        codes = [t.encode(i, 8 * u, 8 * v) for i in range(len(t.OBJECTS))]
        report = t.report(codes)
        out += report
        for code in t.read_report(report):
            units, turn = t.decode_units(code) or (0, 0)
            out += bytes([units & 255, units >> 8, turn & 255, (turn >> 8) & 255])
sys.stdout.buffer.write(out)
