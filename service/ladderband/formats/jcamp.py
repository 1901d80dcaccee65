"""JCAMP-DX 4.24: bands as text that spectrum software reads.

Label syntax after McDonald and Wilks, Appl. Spectrosc. 42, 151 (1988): equidistant axes as
(X++(Y..Y)), others as (XY..XY), several bands as one compound file of blocks. Ordinates are written
in full precision (decimal form), so XFACTOR and YFACTOR are 1.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ladderband.formats.sheet import Sheet
from ladderband.numerics.transition import Floats
from ladderband.usecases.bands_question import Band, BandsAnswer, BandsQuestion

X_UNITS = {"cm-1": "1/CM", "nm": "NANOMETERS", "eV": "ELECTRONVOLTS", "THz": "TERAHERTZ"}
DATA_TYPES = {
    "absorption": "UV/VIS SPECTRUM",
    "emission": "FLUORESCENCE SPECTRUM",
    "photoelectron": "PHOTOELECTRON SPECTRUM",
}
LINE = 78
"""Longest line written; readers may stop at 80."""


def bands_jcamp(sheet: Sheet, question: BandsQuestion, answer: BandsAnswer) -> Iterator[bytes]:
    """One block a band; several bands in one compound file."""
    title = sheet.title or "Computed band"
    if len(answer.bands) == 1:
        yield from _block(sheet, question, answer, answer.bands[0], title)
        return
    yield _text(
        {
            "TITLE": title,
            "JCAMP-DX": f"4.24 $$ Ladderband {sheet.version}",
            "DATA TYPE": "LINK",
            "BLOCKS": str(len(answer.bands) + 1),
        }
    )
    for index, band in enumerate(answer.bands, start=1):
        yield from _block(sheet, question, answer, band, f"{title}, band {index}")
    yield b"##END=\r\n"


def _block(
    sheet: Sheet, question: BandsQuestion, answer: BandsAnswer, band: Band, title: str
) -> Iterator[bytes]:
    x, y = answer.axis.values, band.intensity
    even = _is_even(x)
    head = {
        "TITLE": title,
        "JCAMP-DX": f"4.24 $$ Ladderband {sheet.version}",
        "DATA TYPE": DATA_TYPES[band.process],
        "ORIGIN": "computed",
        "OWNER": "not stated",
        "TEMPERATURE": f"{band.temperature_k - 273.15!r} $$ {band.temperature_k!r} K",
        "XUNITS": X_UNITS[answer.axis.unit],
        "YUNITS": answer.intensity_unit.upper() if question.scale != "relative" else "RELATIVE",
        "FIRSTX": repr(float(x[0])),
        "LASTX": repr(float(x[-1])),
        "FIRSTY": repr(float(y[0])),
        "MAXX": repr(float(x.max())),
        "MINX": repr(float(x.min())),
        "MAXY": repr(float(y.max())),
        "MINY": repr(float(y.min())),
        "XFACTOR": "1",
        "YFACTOR": "1",
        "NPOINTS": str(len(x)),
        "$REQUEST DIGEST": sheet.digest,
        "$ACCURACY": f"bound {float(np.max(band.accuracy.bound)):.3g}, {band.accuracy.evidence}",
    }
    if even:
        head["DELTAX"] = repr(float(x[-1] - x[0]) / (len(x) - 1))
        head["XYDATA"] = "(X++(Y..Y))"
    else:
        head["XYPOINTS"] = "(XY..XY)"
    yield _text(head)
    yield from _even_rows(x, y) if even else _pair_rows(x, y)
    yield b"##END=\r\n"


def _text(labels: dict[str, str]) -> bytes:
    lines = [f"##{label}={value}"[:LINE] for label, value in labels.items()]
    return ("\r\n".join(lines) + "\r\n").encode("ascii", "replace")


def _is_even(x: Floats) -> bool:
    """Equidistant to what a reader that recomputes the abscissa can tell."""
    if len(x) < 2:
        return False
    even = np.linspace(x[0], x[-1], len(x))
    return bool(np.abs(x - even).max() <= 1e-9 * np.abs(x).max())


def _even_rows(x: Floats, y: Floats) -> Iterator[bytes]:
    """Each line: its first abscissa, then as many ordinates as fit."""
    values = [repr(value) for value in y.tolist()]
    lines, start = [], 0
    while start < len(values):
        line, index = f"{float(x[start]):.12g}", start
        while index < len(values) and len(line) + 1 + len(values[index]) <= LINE:
            line += " " + values[index]
            index += 1
        lines.append(line)
        start = index
        if len(lines) == 1000 or start == len(values):
            yield ("\r\n".join(lines) + "\r\n").encode()
            lines = []


def _pair_rows(x: Floats, y: Floats) -> Iterator[bytes]:
    for start in range(0, len(x), 4096):
        pairs = zip(x[start : start + 4096].tolist(), y[start : start + 4096].tolist(), strict=True)
        yield "".join(f"{a!r}, {b!r}\r\n" for a, b in pairs).encode()
