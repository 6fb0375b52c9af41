"""Delimited text in the many ways in which tools write it, and the readings that are refused."""

from pathlib import Path

import numpy as np
import pytest

from polefit.errors import AmbiguousFileError, ArgumentError, FormatError
from polefit.readers.delimited import parse
from polefit.readers.reading import ReadOptions

DATA = Path(__file__).resolve().parents[1] / "data" / "simulator"
F = np.array([1e9, 1.5e9, 2e9, 2.5e9])
Z = np.array([12.5 - 3.25j, 10.75 + 1.5j, -4.25 + 20j, 7 + 0.5j])
W = np.array([1 + 2j, 3 - 4j, 5.5 + 6j, -7 - 8j])
SIZE, DEGREES = np.abs(Z), np.angle(Z, deg=True)


def read(text, stem="node", encoding="utf-8", **options):
    content = text if isinstance(text, bytes) else text.encode(encoding)
    return parse(content, ReadOptions(**options), stem=stem)


def rows(form, *columns, comma=False):
    """One line for each frequency; `comma` for decimal commas."""
    plain = (np.asarray(column).tolist() for column in columns)
    text = "".join(form % row + "\n" for row in zip(*plain, strict=True))
    return text.replace(".", ",") if comma else text


def check(parsed, *, names=None, quantity=None, columns=(Z,), rtol=0.0):
    found = parsed.responses
    np.testing.assert_allclose(found.frequency_hz, F, rtol=1e-15)
    np.testing.assert_allclose(found.values, np.column_stack(columns), rtol=rtol)
    if names is not None:
        assert [str(c) for c in found.channels] == names
    if quantity is not None:
        assert found.quantity == quantity


RI = (F, Z.real, Z.imag)
GHZ = (F / 1e9, Z.real, Z.imag)
TWO = (F, Z.real, Z.imag, W.real, W.imag)

# -- headings, separators, units ----------------------------------------------------------------

PLAIN = [
    ("Freq [GHz],Re(Z(gate2)) [Ohm],Im(Z(gate2)) [Ohm]\n" + rows("%r,%r,%r", *GHZ), ["gate2"]),
    ("frequency;Z_re;Z_im\nGHz;Ohm;Ohm\n" + rows("%r;%r;%r", *GHZ), ["node"]),
    ("f (MHz)\tR (kOhm)\tX (kOhm)\n" + rows("%r\t%r\t%r", F / 1e6, Z.real / 1e3, Z.imag / 1e3),
     ["node"]),
    ("freq/Hz real(Zin)/Ω imag(Zin)/Ω\n" + rows("%r %r %r", *RI), ["in"]),
    ('"Freq [GHz]","re(Z(1,1)) []","im(Z(1,1)) []"\n' + rows("%r,%r,%r", *GHZ), ["node"]),
    ("# Frequency (THz)   Re Z(out)   Im Z(out)\n" + rows("  %r  %r  %r ",
     F / 1e12, Z.real, Z.imag), ["out"]),
    ("% f_Hz Z_d1.re Z_d1.im\n" + rows("%r %r %r", *RI), ["d1"]),
    ("omega [rad/s],Re(Z) [Ohm],Im(Z) [Ohm]\n"
     + rows("%.17g,%r,%r", 2 * np.pi * F, Z.real, Z.imag), ["node"]),
    ("index,freq [Hz],Re(Z(a)),Im(Z(a))\n" + rows("%d,%r,%r,%r", range(4), *RI), ["a"]),
    ('"freq (Hz)","Re(Z(a))","Im(Z(a))",\n' + rows("%r,%r,%r,", *RI), ["a"]),
    ('"freq (Hz)","Re(Z(a))","Im(Z(a))"\n' + rows('"%r","%r","%r"', *RI), ["a"]),
    ("freq (Hz),Z(a)\n" + rows("%r,complex(%r, %r)", *RI), ["a"]),
    ("freq (Hz)\tZ(a)\n" + rows("%r\t(%r, %r)", *RI), ["a"]),
    ('freq (Hz);Z(a)\n' + rows('%r;"%r,%r"', *RI), ["a"]),
    ("freq (Hz),Z(a)\n" + rows("%r,%s", F, Z), ["a"]),
    ("freq (Hz),Z(a)\n" + rows("%r,%r%+.17gi", *RI), ["a"]),
    ("freq (Hz),Z(a)\n" + rows("%r,%r%+.17gj", *RI).replace("+", " + "), ["a"]),
    ("freq (Hz)\tZ(a)\n" + rows("%r\t%r,%r", *RI), ["a"]),
    ("Z of a run\n\nfreq (Hz) Re(Z(a)) Im(Z(a))\n------ ------ ------\n" + rows("%r %r %r", *RI),
     ["a"]),
    ("freq (Hz),Re(Z(a)),Im(Z(a))\n" + rows("%r,%r,%r ! good", *RI), ["a"]),
    ("freq (Hz),Re(Z(a)),Im(Z(a))\n" + rows("%r,%r,%r\n# between\n\n", *RI), ["a"]),
    ("freq (Hz) Re(Z(a)) Im(Z(a))\n" + rows("%.9E %.9E %.9E", *RI).replace("E", "D"), ["a"]),
    ("freq (Hz),Re(Z(a)),Im(Z(a))\n" + rows("%r,%r,%r", *RI).replace("-", "−"), ["a"]),
]  # fmt: skip


@pytest.mark.parametrize(("text", "names"), PLAIN, ids=range(len(PLAIN)))
def test_impedances_in_many_ways(text, names):
    # Units scale the printed numbers: one or two roundings.
    check(read(text), names=names, quantity="impedance", rtol=1e-15)


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "latin-1"])
def test_encodings_and_line_ends(encoding, end):
    text = "f [Hz];Re(Z(Fußpunkt°)) [kOhm];Im(Z(Fußpunkt°)) [kOhm]\n" + rows("%r;%r;%r", *RI)
    found = read(text.replace("\n", end), encoding=encoding)
    check(found, names=["Fußpunkt°"], columns=(1e3 * Z,))
    assert "1000" in found.scaling


POLAR = [
    ("freq (Hz),Mag(Z(a)) (Ohm),Phase(Z(a)) (deg)\n", SIZE, DEGREES, "impedance"),
    ("freq (Hz),|Z| [Ω],arg Z [rad]\n", SIZE, np.radians(DEGREES), "impedance"),
    ("freq (Hz),dB(S(1,1)),ang_deg(S(1,1))\n", 20 * np.log10(SIZE), DEGREES, "scattering"),
    ("freq (Hz),S11 (dB),S11 (deg)\n", 20 * np.log10(SIZE), DEGREES, "scattering"),
    ("freq (Hz),dB(S11),phase(S11)\n", 20 * np.log10(SIZE), DEGREES, "scattering"),
]


@pytest.mark.parametrize(("head", "first", "second", "quantity"), POLAR, ids=range(len(POLAR)))
def test_magnitudes_decibels_and_phases(head, first, second, quantity):
    text = head + rows("%.17g,%.17g,%.17g", F, first, second)
    # The exponential of printed decibels and degrees: some roundings.
    check(read(text), quantity=quantity, rtol=1e-14)


def test_a_shared_axis_and_an_axis_for_each_trace():
    shared = "freq (Hz),Re(Z(a)),Im(Z(a)),Re(Z(b)),Im(Z(b))\n" + rows("%r,%r,%r,%r,%r", *TWO)
    check(read(shared), names=["a", "b"], columns=(Z, W))
    own = "freq (Hz),Re(Z(a)),Im(Z(a)),freq (Hz),Re(Z(b)),Im(Z(b))\n" + rows(
        "%r,%r,%r,%r,%r,%r", F, Z.real, Z.imag, F, W.real, W.imag
    )
    check(read(own), names=["a", "b"], columns=(Z, W))
    bare = rows("%r %r %r %r %r %r", F, Z.real, Z.imag, F, W.real, W.imag)
    found = read(bare, quantity="impedance", form="real-imaginary")
    check(found, names=["node_1 ← node", "node_2 ← node"], columns=(Z, W))


def test_traces_on_different_axes_are_refused_with_both_frequencies():
    moved = np.where(F == 2e9, 2.001e9, F)
    other = rows("%r %r %r %r %r %r", F, Z.real, Z.imag, moved, W.real, W.imag)
    head = "freq Re(Z(a)) Im(Z(a)) freq Re(Z(b)) Im(Z(b))\n"
    with pytest.raises(FormatError, match=r"2001000000 beside 2000000000\); write one file") as e:
        read(head + other)
    assert e.value.line == 4


def test_waveform_tables_with_x_and_y_of_each_trace():
    head = 'VF("/g") X,VF("/g") re,VF("/g") im,VF("/d") X,VF("/d") re,VF("/d") im\n'
    text = head + rows("%r,%r,%r,%r,%r,%r", F, Z.real, Z.imag, F, W.real, W.imag)
    check(read(text, driven="/g"), names=["/g", "/d ← /g"], columns=(Z, W))
    head = 'mag(VF("/g")) X,mag(VF("/g")) Y,phase(VF("/g")) X,phase(VF("/g")) Y\n'
    text = head + rows("%r,%.17g,%r,%.17g", F, SIZE, F, DEGREES)
    check(read(text, driven="/g"), names=["/g"], rtol=1e-14)


def test_waveform_tables_with_units_behind_x_and_y():
    head = 'mag(V("/d1")) X (Hz),mag(V("/d1")) Y (V),phase(V("/d1")) X (Hz),phase(V("/d1")) Y (deg)'
    text = f"{head}\n" + rows("%r,%.17g,%r,%.17g", F, SIZE, F, DEGREES)
    for driven in ("/d1", "d1", "V(/d1)"):
        check(read(text, driven=driven), names=["/d1"], rtol=1e-14)
    body = rows("%r,%.17g,%r,%.17g", F / 1e9, SIZE, F / 1e9, DEGREES)
    check(read(head.replace("Hz", "GHz") + "\n" + body, driven="d1"), rtol=1e-14)


@pytest.mark.parametrize("degree", [b"\xb0", "°".encode(), b"deg"])
def test_decibels_and_degrees_in_one_field(degree):
    body = rows("%.6e\t(%.15edB,%.15e*)", F, 20 * np.log10(SIZE), DEGREES).encode()
    found = read(b"Freq.\tV(g)\n" + body.replace(b"*", degree), driven="g")
    check(found, names=["g"], quantity="impedance", rtol=1e-13)
    with pytest.raises(ArgumentError, match="marked as decibel-angle"):
        read(b"Freq.\tV(g)\n" + body.replace(b"*", degree), driven="g", form="real-imaginary")


@pytest.mark.parametrize("separator", ["\t", "  ", ","])
def test_magnitude_and_degrees_with_a_slash(separator):
    body = rows(f"%.6e{separator}%.15e / %.15e", F, SIZE, DEGREES)
    found = read(f"freq (Hz){separator}Z(g)\n{body}")
    check(found, names=["g"], quantity="impedance", rtol=1e-13)
    assert found.responses.precision is None  # 16 digits
    dated = "1/2 of a table, 12/01/2026\nfreq (Hz),Re(Z(g)),Im(Z(g))\n" + rows("%r,%r,%r", *RI)
    check(read(dated), names=["g"])


def test_network_parameters_by_ports():
    text = "freq,re_Z11,im_Z11,re_Z21,im_Z21\n" + rows("%r,%r,%r,%r,%r", *TWO)
    check(read(text), names=["port1", "port2 ← port1"], columns=(Z, W), quantity="impedance")
    text = "freq (Hz);S[1,1].re;S[1,1].im;S[2,1].re;S[2,1].im\n" + rows("%r;%r;%r;%r;%r", *TWO)
    found = read(text, reference_ohm=50)
    check(found, names=["port1", "port2 ← port1"], columns=(Z, W), quantity="scattering")
    assert found.responses.reference_ohm == (50, 50)


def test_columns_of_a_simulator_with_real_and_imaginary_letters():
    text = '"acfrequency";"r v1.v";"i v1.v"\n' + rows("%r;%r;%r", *RI)
    check(read(text, driven="v1.v"), names=["v1.v"], quantity="impedance")


# -- decimal comma ------------------------------------------------------------------------------


@pytest.mark.parametrize("separator", [";", "\t", "  "])
def test_a_decimal_comma_is_settled_once_and_told(separator):
    head = separator.join(["Freq[GHz]", "Re(Z(a))", "Im(Z(a))"]) + "\n"
    found = read(head + rows(separator.join(["%r"] * 3), *GHZ, comma=True))
    check(found, names=["a"], rtol=1e-15)
    assert found.decimal_mark == ","
    assert "decimal comma" in found.assumptions[0]
    assert read(head + rows(separator.join(["%r"] * 3), *GHZ)).decimal_mark == "."


def test_a_point_in_a_file_of_decimal_commas_is_refused():
    text = "f [GHz];Re(Z);Im(Z)\n1,5;2,5;3,5\n2,5;2.5;3,5\n"
    with pytest.raises(FormatError) as error:
        read(text)
    assert error.value.line == 3


def test_decimal_commas_within_quotes():
    text = '"f [GHz]","Re(Z(a))","Im(Z(a))"\n"1,0","2,5","-3,25"\n"2,0","2,75","-3,5"\n'
    found = read(text).responses
    assert found.values[:, 0].tolist() == [2.5 - 3.25j, 2.75 - 3.5j]


def test_thousands_separators_are_not_guessed():
    grouped = "f [Hz];Re(Z);Im(Z)\n1,000;2,500;3,500\n2,000;2,750;3,250\n"
    with pytest.raises(AmbiguousFileError, match=r"1\.000 .*or 1000 .*--decimal"):
        read(grouped)
    assert read(grouped, decimal=",").responses.values[0, 0] == 2.5 + 3.5j
    with pytest.raises(FormatError, match="thousands separators"):
        read("f [Hz];Re(Z);Im(Z)\n1.000.000,5;2,5;3,5\n2.000.000,5;2,5;3,5\n")


def test_a_comma_between_fields_or_in_numbers():
    """1,5,2 … may be three columns; but never one and a half with one column lacking."""
    text = "1000,2,3\n2000,3,4\n3000,5,6\n"
    found = read(text, quantity="impedance", form="real-imaginary").responses
    assert found.values[:, 0].tolist() == [2 + 3j, 3 + 4j, 5 + 6j]


# -- what the file leaves open ------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "options", "named"),
    [
        (rows("%r %r %r", *RI), {}, "--form"),
        (rows("%r %r %r", *RI), {"form": "real-imaginary"}, "--quantity"),
        ("freq (Hz),Re(x),Im(x)\n" + rows("%r,%r,%r", *RI), {}, "--quantity"),
        ("freq,Re(Z),Im(Z)\n" + rows("%r,%r,%r", *GHZ), {}, "--frequency-unit"),
        ("freq (mHz),Re(Z),Im(Z)\n" + rows("%r,%r,%r", *RI), {}, "--frequency-unit"),
        ("freq (Hz),Mag(Z),Phase(Z)\n" + rows("%r,%r,%r", F, SIZE, np.radians(DEGREES)), {},
         "--angle-unit"),
        ("freq (Hz),Re(V(a)),Im(V(a))\n" + rows("%r,%r,%r", *RI), {}, "--driven"),
        ("freq (Hz),Re(Z(a)),Im(Z(a)),Re(Y(b)),Im(Y(b))\n" + rows("%r,%r,%r,%r,%r", *TWO), {},
         "--quantity"),
        ("freq (THz),Re(Z),Im(Z)\n" + rows("%r,%r,%r", *RI), {}, "--frequency-unit"),
    ],
)  # fmt: skip
def test_two_readings_are_refused_and_the_option_named(text, options, named):
    with pytest.raises(AmbiguousFileError) as error:
        read(text, **options)
    assert named in str(error.value)


def test_the_options_settle_it():
    bare = rows("%r %r %r", *GHZ)
    found = read(bare, form="real-imaginary", quantity="admittance", frequency_unit="GHz")
    check(found, names=["node"], quantity="admittance")
    polar = rows("%r %r %r", F, SIZE, np.radians(DEGREES))
    found = read(polar, form="magnitude-angle", angle_unit="rad", quantity="impedance", node="g")
    check(found, names=["g"], rtol=1e-14)
    decibel = rows("%r %.17g %.17g", F, 20 * np.log10(SIZE), DEGREES)
    found = read(decibel, form="decibel-angle", angle_unit="deg", quantity="transfer")
    check(found, quantity="transfer", rtol=1e-14)


def test_the_form_given_stands_above_the_headings():
    text = "freq (Hz),Re(Z(a)),Im(Z(a))\n" + rows("%r,%.17g,%.17g", F, SIZE, DEGREES)
    found = read(text, form="magnitude-angle", angle_unit="deg")
    check(found, names=["a"], quantity="impedance", rtol=1e-14)
    assert any("magnitude-angle as given, whatever the headings" in a for a in found.assumptions)
    text = "freq (Hz),Modulo Z [Ohm],Fase [deg]\n" + rows("%r,%.17g,%.17g", F, SIZE, DEGREES)
    check(read(text, form="magnitude-angle", node="a"), names=["a"], rtol=1e-14)
    with pytest.raises(FormatError, match=r"only 'Modulo Z.*say form= \(--form\)"):
        read(text)
    text = "freq,Re(Z),Im(Z),Mag(Z)\n" + rows("%r,%r,%r,%r", F, Z.real, Z.imag, SIZE)
    with pytest.raises(ArgumentError, match="headings say real-imaginary"):
        read(text, form="decibel-angle")


@pytest.mark.parametrize(
    ("head", "first", "second"),
    [
        ("Frequenz [MHz];Betrag Z [Ohm];Phase [°]", SIZE, DEGREES),
        ("Frequenz (MHz);Betrag(Z) (Ohm);Winkel(Z) (Grad)", SIZE, DEGREES),
        ("Frequenz/MHz;Realteil Z/Ohm;Imaginärteil Z/Ohm", Z.real, Z.imag),
        ("Frequenz [MHz];Realteil(Z);Imaginaerteil(Z)", Z.real, Z.imag),
    ],
)
@pytest.mark.parametrize("encoding", ["utf-8", "latin-1", "utf-16"])
def test_german_spreadsheets(head, first, second, encoding):
    body = rows("%.17g;%.17g;%.17g", F / 1e6, first, second, comma=True)
    found = read(f"{head}\n{body}", encoding=encoding)
    check(found, names=["node"], quantity="impedance", rtol=1e-14)
    assert found.decimal_mark == ","


def test_transfers_under_a_source_beside_the_columns():
    text = "freq (Hz),Re(V(g)),Im(V(g)),Re(V(d)),Im(V(d))\n" + rows("%r,%r,%r,%r,%r", *TWO)
    silent = read(text, quantity="transfer")
    check(silent, names=["g ← source", "d ← source"], columns=(Z, W), quantity="transfer")
    check(read(text, quantity="transfer", driven="vs"), names=["g ← vs", "d ← vs"], columns=(Z, W))
    with pytest.raises(ArgumentError, match="no node voltage called 'drain'; it holds g, d"):
        read(text, quantity="transfer", driven="drain")  # a mistaken node, not a source
    one = "freq (Hz),Re(V(d)),Im(V(d))\n" + rows("%r,%r,%r", *RI)
    check(read(one, quantity="transfer"), names=["d ← source"], quantity="transfer")


def test_a_node_at_the_voltage_of_a_source_gives_no_impedances():
    still = np.ones(4)
    text = "freq (Hz),Re(V(g)),Im(V(g)),Re(V(d)),Im(V(d))\n" + rows(
        "%r,%r,%r,%r,%r", F, still, 0 * still, W.real, W.imag
    )
    with pytest.raises(AmbiguousFileError, match=r"g is at 1 V at every frequency.*--quantity"):
        read(text, driven="g")
    check(read(text, driven="g", quantity="transfer"), names=["d ← g"], columns=(W,))


def test_ports_are_named_by_the_node_option():
    text = "freq,re_Z11,im_Z11,re_Z21,im_Z21\n" + rows("%r,%r,%r,%r,%r", *TWO)
    check(read(text, node="in,out"), names=["in", "out ← in"], columns=(Z, W))
    with pytest.raises(ArgumentError, match="does not name 2 ports"):
        read(text, node="in")
    named = "freq,re(Z(a)),im(Z(a)),re(Z(b)),im(Z(b))\n" + rows("%r,%r,%r,%r,%r", *TWO)
    with pytest.raises(ArgumentError, match="node: the file holds 2 responses; use select"):
        read(named, node="in,out")


def test_driven_node_voltages():
    text = "freq (Hz),Re(V(g)),Im(V(g)),Re(V(d)),Im(V(d))\n" + rows("%r,%r,%r,%r,%r", *TWO)
    check(read(text, driven="g"), names=["g", "d ← g"], columns=(Z, W), quantity="impedance")
    check(read(text, driven="g", select=["d"]), names=["d ← g"], columns=(W,))
    ratio = read(text, driven="g", quantity="transfer")
    check(ratio, names=["d ← g"], columns=(W / Z,), rtol=1e-15)


def test_one_quantity_of_several():
    text = "freq (Hz),Re(Z(a)),Im(Z(a)),Re(Y(a)),Im(Y(a))\n" + rows("%r,%r,%r,%r,%r", *TWO)
    check(read(text, quantity="admittance"), names=["a"], columns=(W,), quantity="admittance")


@pytest.mark.parametrize(
    ("options", "word"),
    [({"decimal": "x"}, "decimal"), ({"delimiter": "pipe"}, "delimiter"),
     ({"frequency_unit": "PHz"}, "frequency_unit"), ({"form": "polar"}, "form"),
     ({"scaling": "absolute"}, "scaling"), ({"select": ["b"]}, "select: no channel 'b'"),
     ({"reference_ohm": 50.0}, "reference_ohm"), ({"driven": "zz"}, "driven")],
)  # fmt: skip
def test_options_that_do_not_fit(options, word):
    text = "freq (Hz),Re(Z(a)),Im(Z(a))\n" + rows("%r,%r,%r", *RI)
    with pytest.raises(ArgumentError, match=word):
        read(text, **options)


# -- tables of a simulator ----------------------------------------------------------------------


def two_node(frequency):
    """Voltages at gate2 and drain1 of two_node.cir for 1 A into gate2, by nodal analysis."""
    s = 2j * np.pi * frequency
    branch = 1 / (s * 3.3e-9)
    gate = 1 / 220 + s * 1.2e-12 + branch
    drain = -1 / 180 + s * 0.8e-12 + branch + 1 / 1e3
    determinant = gate * drain - branch**2
    return np.column_stack((drain / determinant, branch / determinant))


@pytest.mark.parametrize("name", ["wrdata_names.data", "wrdata_names_single.data"])
def test_data_columns_with_names(name):
    parsed = read((DATA / name).read_bytes(), driven="gate2")
    found = parsed.responses
    assert [str(c) for c in found.channels] == ["gate2", "drain1 ← gate2"]
    # Ten digits are printed.
    np.testing.assert_allclose(found.values, two_node(found.frequency_hz), rtol=1e-9)
    assert found.precision.first.significant == 10


@pytest.mark.parametrize("name", ["wrdata_plain.data", "wrdata_single.data", "wrdata_one.data"])
def test_data_columns_without_names_are_known_by_their_looks(name):
    found = read((DATA / name).read_bytes(), quantity="impedance").responses
    expected = two_node(found.frequency_hz)[:, : len(found.channels)]
    np.testing.assert_allclose(found.values, expected, rtol=1e-9)


def test_a_printed_log_with_pages():
    parsed = read((DATA / "two_node_print.log").read_bytes(), driven="gate2")
    found = parsed.responses
    assert parsed.format == "simulator print table"
    assert found.points == 61
    assert [c.output for c in found.channels] == ["gate2", "drain1"]
    # Six digits are printed; negative numbers carry one less.
    np.testing.assert_allclose(found.values, two_node(found.frequency_hz), rtol=1e-5, atol=1e-3)
    assert found.precision.first.significant in (5, 6)


# -- damage -------------------------------------------------------------------------------------

HEAD = "freq (Hz),Re(Z),Im(Z)\n"


@pytest.mark.parametrize(
    ("text", "line", "word"),
    [
        (HEAD + "1e9,1,2\n2e9,1\n3e9,1,2\n", 3, "2 numbers in this row, 3 in the first"),
        (HEAD + "1e9,1,2\n2e9,1,x\n3e9,1,2\n", 3, "text where numbers should be"),
        (HEAD + "1e9,1,2\n2e9,1,nan\n3e9,1,2\n", 3, "not finite"),
        (HEAD + "1e9,1,2\n2e9,1,1e999\n3e9,1,2\n", 3, "not finite"),
        (HEAD + "1e9,1,2\n1e9,1,2\n", 3, "comes again"),
        (HEAD + "1e9,1,2\n3e9,1,2\n2e9,1,2\n", 4, "falls from 3000000000 (line 3)"),
        (HEAD + "3e9,1,2\n2e9,1,2\n1e9,1,2\n", 3, "fall throughout"),
        (HEAD + "-1e9,1,2\n2e9,1,2\n", 2, "negative frequency"),
        (HEAD + "1e9,1,2\nEND\n", 3, "text where numbers should be: 'END'"),
        ("freq (Hz),|Z|,Phase (deg)\n1e9,-1,2\n2e9,1,2\n", 2, "negative magnitude"),
        ("freq (Hz),Re(Z)\n1e9,1\n2e9,1\n", None, "no complete response: only 'Re(Z)'"),
        ("time (s),Re(Z),Im(Z)\n1,1,1\n2,1,1\n", None, "over time"),
        (HEAD, None, "no row of numbers"),
        ("a word\n", None, "no line begins with a number, the first is 'a word'"),
        ("f;Re(Z);Im(Z)\n10MEG;1;2\n20MEG;1;2\n", 2, "10MEG is no plain number, in '10MEG;1;2'"),
        ("f,Re(Z),Im(Z)\n10MEG,1.123,2\n20MEG,1,2\n", 2, "10MEG is no plain number"),
        ("f\tRe(Z)\tIm(Z)\n0.01 GHz\t1\t2\n0.02 GHz\t1\t2\n", 2, "0.01 GHz is no plain number"),
        ("f,Re(Z),Im(Z)\n1,5k,2\n2,5k,2\n", 2, "5k is no plain number"),
        ("f | Re(Z) | Im(Z)\n1e9 | 1 | 2\n", 2, "this is none: '1e9 | 1 | 2'"),
        ("\n\n \n", None, "only blank lines"),
        ("freq (Hz),Re(Z(a)),Im(Z(a)),Re(Z(a)),Im(Z(a))\n1e9,1,2,3,4\n2e9,1,2,3,4\n", None,
         "two responses are named a"),
        ("1e9,1,x\n2e9,1,2\n3e9,1,2\n", 1, "text where numbers should be"),
    ],
)  # fmt: skip
def test_refusals_name_the_line(text, line, word):
    import re

    with pytest.raises(FormatError) as error:
        read(text, quantity="impedance", form=None)
    assert any(part in str(error.value) for part in word.split("|")), str(error.value)
    assert error.value.line == line
    assert not re.search("[\r\n]", str(error.value))


def test_late_damage_in_a_large_file_names_its_line():
    count = 60_000
    lines = [f"{1e6 + i},{i % 7},{i % 11}" for i in range(count)]
    lines[-3] = lines[-3].replace(",", ";")
    with pytest.raises(FormatError) as error:
        read(HEAD + "\n".join(lines) + "\n")
    assert error.value.line == count - 1


def test_columns_without_a_partner_are_told():
    text = "freq (Hz),Re(Z(a)),Im(Z(a)),Temp\n" + rows("%r,%r,%r,25", *RI)
    found = read(text)
    check(found, names=["a"])
    assert any("'Temp' left out" in told for told in found.warnings)


def test_digits_are_told():
    found = read(HEAD + rows("%.3f,%.4f,%.4f", F, *(np.array([Z.real, Z.imag]) / 3)))
    precision = found.responses.precision
    assert precision.form == "real-imaginary"
    assert precision.second.decimals == 4 or precision.second.significant
