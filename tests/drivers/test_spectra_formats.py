"""JCAMP-DX and columns of text, against published examples and an independent reader."""

from __future__ import annotations

import contextlib
import io
import math

import jcamp
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigd_drivers.spectra import columns, jcamp_dx
from rigd_drivers.spectra.wire import Curve, curve

HEAD = """##TITLE= test
##JCAMP-DX= 4.24
##DATA TYPE= INFRARED SPECTRUM
##XUNITS= 1/CM
##YUNITS= {unit}
##XFACTOR= {x_factor}
##YFACTOR= {y_factor}
##FIRSTX= {first}
##LASTX= {last}
##NPOINTS= {points}
##XYDATA= (X++(Y..Y))
"""

PLAIN = """4 0 0 0 0 2 4 4 4 7
13 5 4 4 5 5 7 10 11 11
22 6 5 7 6 9 9 7 10 10
31 9 10 11 12 15 16 16 14 17
40 38 38 35 38 42 47 54 59 66
49 75 78 88 96 104 110 121 128
##END=
"""
DIFDUP = """4@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P
56A28
##END=
"""
"""One curve in two forms: the example of the JCAMP-DX protocols for plain numbers and for difference-duplicate form
(J. I. Baumbach et al., Pure Appl. Chem. 73 (2001) 1765), as it stands in the test data of the ``jcamp`` package."""

ISOPROPANOL = """2561A058O445j574k394k500J085J232K650J052o294P237k468p57m255K018L444j210
2610D769J23m746j537M899M0r72p11J048J73m050K668R55o16L229n677k606L168K97
2666D54N96K737m60m320K919r95r36K971L68k285L782k429L460K48o623L094j48
##END=
"""
"""The first lines of isopropanol_ASDF.jdx, a measured spectrum in difference form (test data of ``jcamp``)."""
STEP = (5000.042 - 400.1963) / 9540

PERKIN = """1781 +9972+9966+9961+9956+9950+9944+9935+9923+9909+9891+9870+9848+9823+9797
1767 +9769+9739+9705+9668+9628+9584+9537+9488+9439+9390+9344+9301+9261+9226
1753 +9195+9169+9149+9133+9123+9119+9118+9124+9132+9145+9162+9183+9209+9238
##END=
"""
"""The carbonyl band of isobutyl acrylate, lines of PE1800.DX of the official test data at jcamp-dx.org."""


def text(
    body: str, points: int, first: float, last: float, *, unit: str = "ABSORBANCE", x: float = 1, y: float = 1
) -> str:
    return HEAD.format(unit=unit, x_factor=x, y_factor=y, first=first, last=last, points=points) + body


def test_the_published_example_means_the_same_in_both_forms() -> None:
    plain, squeezed = (jcamp_dx.read(text(body, 53, 4, 56, y=0.1)) for body in (PLAIN, DIFDUP))
    assert plain == squeezed
    assert (plain.start_per_cm, plain.step_per_cm) == (4.0, 1.0)
    assert plain.absorbance[-1] == pytest.approx(12.8)
    assert sum(plain.absorbance) == pytest.approx(sum(map(int, " ".join(
        line.split(" ", 1)[1] for line in PLAIN.splitlines()[:-1]).split())) / 10)  # fmt: skip


def test_a_measured_file_in_difference_form_is_read_as_the_library_reads_it() -> None:
    """Without duplicates the library is right; it is an independent peer there."""
    points = 17 + 18 + 17
    whole = text(ISOPROPANOL, points, 400.1963, 400.1963 + (points - 1) * STEP, x=0.15625132569, y=2.84e-05)
    with io.StringIO(whole) as file:
        theirs = jcamp.read(file)
    ours = jcamp_dx.read(whole)
    assert len(ours.absorbance) == points == len(theirs["y"])
    assert ours.absorbance == pytest.approx(list(theirs["y"]))
    assert ours.start_per_cm == pytest.approx(theirs["x"][0])


def test_transmittance_falling_wavenumbers_and_signs_for_blanks() -> None:
    found = jcamp_dx.read(text(PERKIN, 42, 1781, 1740, unit="TRANSMITTANCE", y=1e-4))
    assert (found.start_per_cm, found.step_per_cm, len(found.absorbance)) == (1740.0, 1.0, 42)
    assert found.absorbance[0] == pytest.approx(-math.log10(0.9238))
    peak = max(range(42), key=lambda i: found.absorbance[i])
    assert 1740 + peak == 1781 - 34  # the least transmittance, 9118


@pytest.mark.parametrize(
    ("spoil", "said"),
    [
        (lambda t: t.replace("##END=\n", ""), "not whole"),
        (lambda t: t.replace("56A28", "56A29"), "Y check"),
        (lambda t: t.replace("4@VKT", "4@UKT"), "X check"),
        (lambda t: t.replace("NPOINTS= 53", "NPOINTS= 54").replace("LASTX= 56", "LASTX= 57"), "53 ordinates are there"),
        (lambda t: t.replace("1/CM", "NANOMETERS"), "units"),
        (lambda t: t.replace("ABSORBANCE", "REFLECTANCE"), "units"),
        (lambda t: t.replace("TLkj", "TLk!j"), "stands for nothing"),
        (lambda t: t.replace("INFRARED SPECTRUM", "LINK"), "compound"),
        (lambda t: t.replace("(X++(Y..Y))", "(X++(R..R))"), "are read"),
    ],
)  # fmt: skip
def test_what_is_against_the_standard_is_said(spoil: object, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        jcamp_dx.read(spoil(text(DIFDUP, 53, 4, 56)))  # type: ignore[operator]


@given(st.text(alphabet="0123456789.+-@AIajJRr%STs \n#=EX", max_size=200))
def test_any_text_is_a_spectrum_or_a_value_error(body: str) -> None:
    with contextlib.suppress(ValueError):
        assert len(jcamp_dx.read(text(body + "\n##END=\n", 5, 900, 916)).absorbance) == 5


def test_columns_by_heading_by_place_and_with_a_decimal_comma() -> None:
    expected = Curve(900.0, 2.0, (0.1, 0.2, 0.3))
    by_name = columns.Columns(x="wavenumber", y="A", rows=3)
    assert columns.read("made by hand\ntime,wavenumber,A\n0,900,0.1\n0,902,0.2\n0,904,0.3\n", by_name) == expected
    assert columns.read("904;0,3\n902;0,2\n900;0,1\n", columns.Columns(comma=True)) == expected
    percent = columns.read("900\t100\n902\t10\n904\t1\n", columns.Columns(unit="percent transmittance"))
    assert percent.absorbance == pytest.approx((0, 1, 2))


@pytest.mark.parametrize(
    ("body", "map_", "said"),
    [
        ("900,0.1\n902,0.2\n904,0.", columns.Columns(), "not whole"),
        ("900,0.1\n902,0.2\n", columns.Columns(rows=3), "2 rows, 3"),
        ("900,0.1\n902\n904,0.1\n", columns.Columns(), "1 columns only"),
        ("900,0.1\n902,x\n904,0.1\n", columns.Columns(), "no number"),
        ("900,0.1\n902,0.1\n905,0.1\n", columns.Columns(), "evenly"),
        ("a,b\n1,2\n", columns.Columns(x="w", y="b"), "headings 'w' and 'b'"),
        ("900,0\n902,0.1\n904,0.1\n", columns.Columns(unit="transmittance"), "zero or less"),
    ],
)
def test_columns_that_do_not_fit_are_said(body: str, map_: columns.Columns, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        columns.read(body, map_)


def test_a_window_cuts_and_says_when_nothing_is_left() -> None:
    whole = curve([900.0 + 2 * i for i in range(100)], [float(i) for i in range(100)], "absorbance")
    cut = whole.within(905, 912)
    assert (cut.start_per_cm, cut.absorbance) == (906.0, (3.0, 4.0, 5.0, 6.0))
    with pytest.raises(ValueError, match="0 points from 2000"):
        whole.within(2000, 2100)
