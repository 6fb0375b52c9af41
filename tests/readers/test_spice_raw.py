"""SPICE raw files: a simulator's own files against the circuits solved by hand, and damage."""

from pathlib import Path

import numpy as np
import pytest

import polefit
from polefit.errors import AmbiguousFileError, ArgumentError, FormatError
from polefit.readers import read_with_report
from polefit.readers.reading import ReadOptions
from polefit.readers.spice_raw import parse

DATA = Path(__file__).resolve().parents[1] / "data" / "simulator"
# Both routes solve the same equations in double precision.
CLOSE = {"rtol": 1e-12, "atol": 1e-12}


def two_node(frequency):
    """(N, 2) voltages at gate2, drain1 of two_node.cir for 1 A into gate2, by nodal analysis."""
    s = 2j * np.pi * frequency
    branch = 1 / (s * 3.3e-9)
    gate = 1 / 220 + s * 1.2e-12 + branch
    drain = -1 / 180 + s * 0.8e-12 + branch + 1 / 1e3  # the bias source is a short for AC
    determinant = gate * drain - branch**2
    return np.column_stack((drain / determinant, branch / determinant))


def one_port_admittance(frequency):
    """Current that one_port.cir draws from its 1 V source."""
    s = 2j * np.pi * frequency
    return 1 / (75 + s * 2e-9 + 1 / (1 / 300 + s * 1e-12))


# -- files of a simulator -----------------------------------------------------------------------


@pytest.mark.parametrize(
    "name", ["two_node_batch.raw", "two_node_batch_ascii.raw", "two_node_write.raw"]
)
def test_node_voltages_under_one_ampere_are_impedances(name):
    found = polefit.read(DATA / name, driven="gate2", select=["gate2", "drain1"])
    assert found.quantity == "impedance"
    assert [str(c) for c in found.channels] == ["gate2", "drain1 ← gate2"]
    # `ac lin` steps as numpy.linspace does, bit for bit.
    assert np.array_equal(found.frequency_hz, np.linspace(0.5e9, 6e9, 21))
    np.testing.assert_allclose(found.values, two_node(found.frequency_hz), **CLOSE)


def test_the_other_plots_are_listed_and_the_ac_plot_taken():
    report = read_with_report(DATA / "two_node_batch.raw", driven="gate2")
    told = " ".join(report.assumptions)
    assert "plot 'AC Analysis' taken" in told
    assert "'Pole-Zero Analysis'" in told
    assert "'Operating Point'" in told
    assert "little-endian" in told
    assert report.format == "SPICE raw (binary)"


def test_nodes_without_a_signal_are_left_out_unless_selected():
    path = DATA / "two_node_batch.raw"
    report = read_with_report(path, driven="gate2")
    assert [c.output for c in report.responses.channels] == ["gate2", "drain1"]
    assert any("zero at every point: bias" in told for told in report.assumptions)
    asked = polefit.read(path, driven="gate2", select=["bias", "gate2"])
    assert [c.output for c in asked.channels] == ["bias", "gate2"]


def test_only_the_real_part_of_the_frequency_counts():
    """The file of the batch run holds uninitialised memory as imaginary part."""
    content = (DATA / "two_node_batch.raw").read_bytes()
    start = content.index(b"Binary:\n") + len(b"Binary:\n")
    numbers = np.frombuffer(content, "<c16", 21 * 6, start).reshape(21, 6)
    assert np.any(numbers[:, 0].imag != 0), "the file no longer shows the trap"
    polefit.read(DATA / "two_node_batch.raw", driven="gate2")


@pytest.mark.parametrize("driven", ["v1", "V1", "i(v1)"])
def test_a_source_current_is_turned(driven):
    """The simulator counts i(v1) from + through the source: the circuit draws -i(v1)."""
    found = polefit.read(DATA / "one_port.raw", driven=driven, quantity="admittance")
    assert [str(c) for c in found.channels] == ["v1"]
    expected = one_port_admittance(found.frequency_hz)
    np.testing.assert_allclose(found.values[:, 0], expected, **CLOSE)
    assert np.all(found.values.real > 0)  # a passive circuit


def test_the_quantity_follows_what_was_driven():
    assert polefit.read(DATA / "one_port.raw", driven="v1").quantity == "admittance"
    assert polefit.read(DATA / "two_node_write.raw", driven="gate2").quantity == "impedance"


@pytest.mark.parametrize("options", [{}, {"quantity": "impedance"}, {"select": ["out"]}])
def test_a_node_at_the_voltage_of_a_source_gives_no_impedances(options):
    """v(in) is 1 V throughout: nothing says how much current the source feeds."""
    with pytest.raises(AmbiguousFileError, match=r"in is at 1 V at every frequency.*--quantity"):
        polefit.read(DATA / "one_port.raw", driven="in", **options)


def test_transfers_under_a_source_that_is_named_or_not():
    named = polefit.read(DATA / "one_port.raw", driven="v1", quantity="transfer", select=["out"])
    silent = read_with_report(DATA / "one_port.raw", quantity="transfer", select=["out"])
    assert silent.responses.channels == (polefit.Channel("out", "source"),)
    assert np.array_equal(silent.responses.values, named.values)
    assert any("1 V AC source, which the file does not name" in a for a in silent.assumptions)


def test_ports_of_network_parameters_are_named_by_the_node_option():
    found = polefit.read(DATA / "ports.raw", node="in,out", select=["out"])
    assert [str(c) for c in found.channels] == ["out ← in", "out"]
    with pytest.raises(ArgumentError, match="node: the vectors of the file have names"):
        polefit.read(DATA / "two_node_write.raw", driven="gate2", node="a,b")


def test_the_current_of_an_inductor_drives_nothing():
    content = ascii_file().replace(b"\tv(d)\tvoltage", b"\ti(l1)\tcurrent")
    with pytest.raises(ArgumentError, match=r"i\(l1\) is not the current of a voltage source; nam"):
        read(content, driven="i(l1)")


def test_transfer_from_a_node_or_a_source():
    by_node = polefit.read(DATA / "one_port.raw", driven="in", quantity="transfer", select=["out"])
    by_source = polefit.read(DATA / "one_port.raw", driven="v1", quantity="transfer",
                             select=["out"])  # fmt: skip
    s = 2j * np.pi * by_node.frequency_hz
    load = 1 / (1 / 300 + s * 1e-12)
    expected = load / (75 + s * 2e-9 + load)
    np.testing.assert_allclose(by_node.values[:, 0], expected, **CLOSE)
    np.testing.assert_allclose(by_source.values[:, 0], expected, **CLOSE)
    assert by_node.channels == (polefit.Channel("out", "in"),)


def test_names_are_compared_without_regard_to_case_and_with_v():
    for name in ("GATE2", "v(gate2)", "V(Gate2)"):
        found = polefit.read(DATA / "two_node_write.raw", driven=name, select="DRAIN1")
        assert found.channels == (polefit.Channel("drain1", "gate2"),)


def ports_of(frequency):
    """S of ports.cir at 50 and 75 ohm: 10 ohm and 2 nH in a T with 1 pF."""
    s = 2j * np.pi * frequency
    shunt = 1 / (s * 1e-12)
    z = np.empty((len(frequency), 2, 2), complex)
    z[:, 0, 0], z[:, 1, 1] = 10 + shunt, s * 2e-9 + shunt
    z[:, 0, 1] = z[:, 1, 0] = shunt
    root = np.diag(1 / np.sqrt([50, 75]))
    normal = root @ z @ root
    return z, (normal - np.eye(2)) @ np.linalg.inv(normal + np.eye(2))


def test_network_parameters_need_no_driven_node():
    report = read_with_report(DATA / "ports.raw", reference_ohm=50)
    found = report.responses
    z, s = ports_of(found.frequency_hz)
    assert found.quantity == "scattering"
    # Its own arithmetic differs a little: 1e-8 is far above that, far below a mistaken order.
    np.testing.assert_allclose(found.values, s.reshape(-1, 4), atol=1e-8)
    impedance = polefit.read(DATA / "ports.raw", quantity="impedance")
    np.testing.assert_allclose(impedance.values, z.reshape(-1, 4), atol=1e-6)
    assert [str(c) for c in impedance.channels] == [
        "port1", "port1 ← port2", "port2 ← port1", "port2"]  # fmt: skip
    unknown = read_with_report(DATA / "ports.raw")
    assert any("reference resistance" in told for told in unknown.warnings)
    nodes = polefit.read(DATA / "ports.raw", driven="p1", quantity="transfer")
    assert "S_1_1" not in [c.output for c in nodes.channels]
    with pytest.raises(ArgumentError, match="reference_ohm"):
        polefit.read(DATA / "ports.raw", quantity="impedance", reference_ohm=50)
    with pytest.raises(ArgumentError, match="no channel 'port3'"):
        polefit.read(DATA / "ports.raw", select="port3")


# -- files made here ----------------------------------------------------------------------------

FREQUENCY = np.array([1e9, 1.5e9, 2e9, 2.5e9])
VOLTAGES = np.array([[1 + 2j, 3 - 4j], [-5.5 + 6j, 7], [8j, -9], [1e-3, 2e6 - 1j]])


def header(kind, *, points=4, plot="AC Analysis", flags="complex", names=("g", "d"), title="x"):
    lines = [f"\t{i + 1}\tv({n})\tvoltage" for i, n in enumerate(names)]
    return "\n".join([
        f"Title: {title}", "Date: none", f"Plotname: {plot}", f"Flags: {flags}",
        f"No. Variables: {len(names) + 1}", f"No. Points: {points}", "Variables:",
        "\t0\tfrequency\tfrequency", *lines, f"{kind}:\n"])  # fmt: skip


def binary(order="<", kind="c16", **more):
    table = np.column_stack((FREQUENCY, VOLTAGES))
    return header("Binary", **more).encode() + table.astype(f"{order}{kind}").tobytes()


def ascii_file(form="%.15e", end="\n", **more):
    text = header("Values", **more)
    for i, (f, row) in enumerate(zip(FREQUENCY, VOLTAGES, strict=True)):
        text += f" {i}\t{form},{form}\n" % (f, 0)
        text += "".join(f"\t{form},{form}\n" % (v.real, v.imag) for v in row)
    return text.replace("\n", end).encode()


OPERATING_POINT = (
    b"Title: x\nDate: none\nPlotname: Operating Point\nFlags: real\nNo. Variables: 1\n"
    b"No. Points: 1\nVariables:\n\t0\tv(g)\tvoltage\nValues:\n 0\t1.5\n\n"
)


def read(content, **options):
    options.setdefault("driven", "g")
    return parse(content, ReadOptions(**options), stem="x")


@pytest.mark.parametrize(
    "content",
    [binary(), binary(">"), ascii_file(), ascii_file(end="\r\n"),
     binary(flags="complex padded"), binary(flags="complex unpadded"),
     OPERATING_POINT + binary(), OPERATING_POINT + ascii_file(), ascii_file() + OPERATING_POINT,
     ascii_file() + b"\n" + ascii_file(plot="Noise", flags="complex").replace(
         b"frequency\tfrequency", b"time\ttime")],
    ids=["little", "big", "ascii", "crlf", "padded", "unpadded", "behind", "behind-ascii",
         "before", "foreign-complex"],
)  # fmt: skip
def test_the_same_numbers_however_written(content):
    found = read(content).responses
    assert np.array_equal(found.frequency_hz, FREQUENCY)
    assert np.array_equal(found.values, VOLTAGES)


def test_digits_of_ascii_files_are_told():
    precision = read(ascii_file("%.5e")).responses.precision
    assert precision.first.significant == precision.second.significant == 6
    assert read(ascii_file("%.15e")).responses.precision is None
    assert read(binary()).responses.precision is None


def test_two_ac_plots_are_not_guessed():
    with pytest.raises(AmbiguousFileError, match=r"2 AC plots: .* of 'one' and .* of 'two'"):
        read(binary(title="one") + binary(title="two"))


def test_a_damaged_plot_behind_the_ac_plot_is_a_warning():
    found = read(binary() + OPERATING_POINT[:-6])
    assert np.array_equal(found.responses.values, VOLTAGES)
    assert "after the AC plot" in found.warnings[0]


def test_what_was_driven_must_be_said():
    with pytest.raises(AmbiguousFileError, match=r"nodes g, d.*--driven"):
        read(binary(), driven=None)
    with pytest.raises(ArgumentError, match="no node voltage called 'x'; it holds g, d"):
        read(binary(), driven="x")
    with pytest.raises(ArgumentError, match="select: the file holds no node voltage called 'x'"):
        read(binary(), select=["x"])
    with pytest.raises(ArgumentError, match="no source current called 'g'"):
        read(binary(), quantity="admittance")
    with pytest.raises(ArgumentError, match="'scattering' cannot be had"):
        read(binary(), quantity="scattering")


def swapped(content, old, new):
    assert old in content
    return content.replace(old, new, 1)


def with_frequencies(*values):
    table = np.column_stack((np.array(values), VOLTAGES))
    return header("Binary").encode() + table.astype("<c16").tobytes()


@pytest.mark.parametrize(
    ("content", "line", "word"),
    [
        (binary()[:-1], None, "cut: 4 points are declared, 3 present"),
        (ascii_file()[:-40], 23, "cut: 4 points are declared, 3 present"),
        (ascii_file()[:-1], 23, "no line end: .* cut"),
        (ascii_file()[:-2], 23, "no line end: .* cut"),
        (b"".join(ascii_file().splitlines(True)[:-1]), None, "cut: 4 points are declared, 3"),
        (b"".join(ascii_file().splitlines(True)[:9]), None, "cut within it"),
        (swapped(ascii_file(), b"No. Points: 4", b"No. Points: 3"), None, "more points than the 3"),
        (swapped(ascii_file(), b"No. Points: 4", b"No. Points: many"), 6, "is no count"),
        (swapped(ascii_file(), b"Variables: 3", b"Variables: 4"), None, "says 4, 3 are listed"),
        (swapped(ascii_file(), b"Flags: complex", b"Flags: 64bit"), None, "no 'Flags: real'"),
        (swapped(ascii_file(), b"-5.5", b"-5.x"), 16, "text where numbers should be"),
        (swapped(ascii_file(), b"-5.500000000000000e+00", b"nan"), 15, "not finite"),
        (swapped(ascii_file(), b" 1\t", b" 2\t"), None, "do not follow its index"),
        (swapped(ascii_file(), b"\tv(d)", b"\tv(g)"), None, "two vectors are named 'g'"),
        (binary(kind="c8"), None, "32 bits"),
        (ascii_file().decode().encode("utf-16"), None, "UTF-16"),
        (OPERATING_POINT, None, "no AC plot"),
        (with_frequencies(1e9, 1e9, 2e9, 3e9), None, "point 2: frequency 1000000000 comes again"),
        (with_frequencies(1e9, 3e9, 2e9, 4e9), None, "point 3: frequency 2000000000 is below"),
        (with_frequencies(-1e9, 1e9, 2e9, 3e9), None, "negative frequency"),
        (with_frequencies(1e30, 2e30, 3e30, 4e30), None, "no sense in either byte order"),
        (binary() + b"junk", None, "must begin with 'Title:'|belong to no plot"),
    ],
)
def test_refusals(content, line, word):
    with pytest.raises(FormatError, match=word) as error:
        read(content)
    if line is not None:
        assert error.value.line == line
