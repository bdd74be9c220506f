"""Decodes the files here with two PyPI packages and writes what they find beside them.

    pip install jcamp==1.3.2 nmrglue==0.12 && python decode.py

`jcamp` does not know PAC, reads repeat counts of one digit only, and only after a difference: a
count after a squeezed value, as in the published example, loses points. So it decodes all but
pac.jdx and dif.jdx, which has such counts; steps.jdx is in differences and has none. `nmrglue`
decodes every even table, ordinates only.
"""

import pathlib

import jcamp
from nmrglue.fileio import jcampdx

here = pathlib.Path(__file__).parent
for path in sorted(here.glob("*.jdx")):
    if path.stem not in ("pac", "dif"):
        found = jcamp.readfile(str(path))
        rows = "".join(f"{float(x)!r},{float(y)!r}\n" for x, y in zip(found["x"], found["y"]))
        path.with_suffix(".jcamp.csv").write_text(rows)
    if path.stem != "pairs":
        raw = jcampdx._readrawdic(str(path))
        block = next(v[0] for k, v in raw.items() if k.startswith("_datatype_"))
        ordinates = jcampdx.getdataarray(block)
        path.with_suffix(".nmrglue.csv").write_text("".join(f"{float(y)!r}\n" for y in ordinates))
