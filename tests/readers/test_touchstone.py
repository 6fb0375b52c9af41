"""Touchstone beyond the standard's rules: options, names, digits, agreement with scikit-rf."""

import warnings

import numpy as np
import pytest

import polefit
from polefit.errors import ArgumentError, DataError, FileError, FormatError
from polefit.readers import read_with_report
from polefit.readers.reading import ReadOptions
from polefit.readers.touchstone import parse, ports_of_suffix


def read(text, suffix=".s1p", **options):
    return parse(text.encode("latin-1"), ReadOptions(**options), stem="gate2", suffix=suffix)


@pytest.fixture
def file(tmp_path):
    def write(text, name="gate2.s1p"):
        path = tmp_path / name
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return path

    return write


# -- against another reader ---------------------------------------------------------------------


@pytest.mark.parametrize("ports", [1, 2, 3, 4, 6])
@pytest.mark.parametrize("form", ["ri", "ma", "db"])
def test_scattering_files_agree_with_scikit_rf(tmp_path, ports, form):
    """scikit-rf writes and reads S of version 1 by the rules, so it serves as a second opinion."""
    skrf = pytest.importorskip("skrf")
    random = np.random.default_rng(ports)
    s = random.normal(size=(11, ports, ports)) + 1j * random.normal(size=(11, ports, ports))
    network = skrf.Network(f=np.linspace(1e9, 2e9, 11), s=s, z0=50, f_unit="hz", name="invented")
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        network.write_touchstone("invented", dir=str(tmp_path), form=form)
    path = next(tmp_path.iterdir())
    other = skrf.Network(str(path))
    ours = polefit.read(path)
    np.testing.assert_allclose(ours.frequency_hz, other.f, rtol=1e-15)
    # Both start from the same printed digits; dB and degrees cost a few roundings each.
    np.testing.assert_allclose(ours.values, other.s.reshape(11, -1), rtol=1e-13, atol=1e-14)
    assert ours.reference_ohm == (50.0,) * ports


def test_a_network_object_and_its_file_are_one(tmp_path):
    skrf = pytest.importorskip("skrf")
    s = np.array([[[0.1 + 0.2j, 0.3], [0.4j, -0.5]], [[0.2, 0.1], [0.3, 0.4]]])
    network = skrf.Network(f=[1e9, 2e9], s=s, z0=50, f_unit="hz", name="invented")
    network.write_touchstone("invented", dir=str(tmp_path))
    from_file = polefit.read(next(tmp_path.iterdir()))
    from_object = polefit.ResponseSet.from_network(network)
    assert from_object.channels == from_file.channels
    np.testing.assert_allclose(from_object.values, from_file.values, rtol=1e-15)


# -- scaling ------------------------------------------------------------------------------------


def test_the_scaling_taken_is_told_and_the_other_can_be_asked_for(file):
    text = "# Hz Z RI R 50\n1e9 2 0\n2e9 3 1\n"
    usual = read(text)
    assert usual.responses.values[:, 0].tolist() == [100, 150 + 50j]
    assert any('scaling="absolute"' in told for told in usual.assumptions)
    assert any("normalised to 50" in told for told in usual.assumptions)
    other = read(text, scaling="absolute")
    assert other.responses.values[:, 0].tolist() == [2, 3 + 1j]
    assert any("absolute as asked" in told for told in other.assumptions)
    again = read(text, scaling="normalised")
    assert np.array_equal(again.responses.values, usual.responses.values)
    report = read_with_report(file(text), scaling="absolute")
    assert report.responses.values[0, 0] == 2


@pytest.mark.parametrize(
    ("letter", "numbers", "level"),
    [("Z", "120 5", "6 kΩ"), ("Z", "2 5", ""), ("Y", "0.02 0.001", "2.5 kΩ"), ("Y", "1 2", "")],
)
def test_numbers_that_look_like_ohm_or_siemens_are_doubted(letter, numbers, level):
    text = f"# Hz {letter} RI R 50\n1e9 {numbers}\n2e9 {numbers}\n"
    told = " ".join(read(text).warnings)
    assert (f"typically {level}:" in told) if level else not told
    assert read(text, scaling="normalised").warnings == ()
    assert read(text, scaling="absolute").warnings == ()


def test_with_one_ohm_there_is_nothing_to_tell():
    assert read("# Hz Z RI R 1\n1e9 2 0\n").assumptions == ()


def test_scattering_has_no_scaling():
    with pytest.raises(ArgumentError, match="scaling: scattering"):
        read("# Hz S RI R 50\n1e9 2 0\n", scaling="absolute")


# -- names --------------------------------------------------------------------------------------


def test_a_one_port_is_named_by_its_file_or_by_the_option(file):
    path = file("# Hz Z RI R 1\n1e9 2 0\n", "interstage.s1p")
    assert str(polefit.read(path).channels[0]) == "interstage"
    assert str(polefit.read(path, node="gate2").channels[0]) == "gate2"


def test_the_node_option_names_every_port(file):
    text = "! Port[1] = in\n! Port[2] = out\n# Hz S RI R 50\n1 1 0 2 0 3 0 4 0\n"
    found = polefit.read(file(text, "a.s2p"), node="gate2, drain1", select=["drain1"])
    assert [str(c) for c in found.channels] == ["drain1 ← gate2", "drain1"]
    assert found.values.tolist() == [[2, 4]]  # S21 stands second in a two-port


@pytest.mark.parametrize("names", ["gate2", "a,b,c", "a,a", "a,"])
def test_names_that_do_not_fit_the_ports(names):
    with pytest.raises(ArgumentError, match=r"does not name 2 ports; give 2 .*such as a,b$"):
        read("# Hz S RI R 50\n1 1 0 2 0 3 0 4 0\n", ".s2p", node=names)


@pytest.mark.parametrize(
    "comments", ["! Port[1] = in\n! Port[2] = out", "! PORT 1: in\n!port 2 : out", "!port(1)=in\n!"]
)
def test_port_names_in_comments(comments):
    text = f"{comments}\n# Hz S RI R 50\n1 1 0 2 0 3 0 4 0\n"
    found = read(text, ".s2p")
    if "out" in comments:
        assert found.responses.channels[1] == polefit.Channel("in", "out")
        assert "in, out" in found.assumptions[0]
    else:  # a name for one port only names none
        assert found.responses.channels[1] == polefit.Channel("port1", "port2")


def test_ports_of_a_name():
    assert ports_of_suffix(".s12p") == 12
    assert ports_of_suffix(".Z2P") == 2
    assert ports_of_suffix(".ts") is ports_of_suffix(".s0p") is ports_of_suffix(".sp") is None


def test_a_misleading_name_is_told():
    found = read("# Hz Z RI R 50\n1e9 2 0\n", ".y1p")
    assert found.responses.quantity == "impedance"
    assert any("option line says Z" in told for told in found.warnings)
    assert read("# Hz Z RI R 50\n1e9 2 0\n", ".s1p").warnings == ()  # .sNp is usual for all


# -- termination and conversion -----------------------------------------------------------------


def test_scattering_states_its_loads_until_they_are_removed(file):
    path = file("# Hz S RI R 75\n1e9 0.5 0\n2e9 0 0.5\n")
    found = polefit.read(path)
    assert "loaded" in found.termination
    assert "75" in found.termination
    open_port = polefit.read(path, quantity="impedance")
    # z = R (1 + s) / (1 - s)
    np.testing.assert_allclose(open_port.values[:, 0], [225, 75 * (0.6 + 0.8j)], rtol=1e-14)
    assert "open" in open_port.termination
    assert "removed" in open_port.termination
    assert any("converted from scattering" in told for told in open_port.source.assumptions)


def test_an_impedance_never_passes_through_scattering():
    """At -50 ohm on 50 ohm S is infinite; an impedance of a circuit that oscillates may be so."""
    found = read("# Hz Z RI R 50\n1e9 -1 0\n2e9 -1 1e-9\n")
    assert found.responses.values[0, 0] == -50


def test_reference_of_the_file_cannot_be_overruled(file):
    path = file("# Hz S RI R 75\n1e9 0.5 0\n")
    with pytest.raises(ArgumentError, match="state 75 Ω"):
        polefit.read(path, reference_ohm=50)
    other = polefit.read(path, quantity="scattering", reference_ohm=225)
    assert abs(other.values[0, 0]) < 1e-15  # 225 ohm, seen from 225 ohm


def test_a_singular_matrix_names_the_frequency(file):
    path = file("# Hz S RI R 50\n1e9 0.5 0\n2e9 1 0\n")
    with pytest.raises(DataError, match="2e"):
        polefit.read(path, quantity="impedance")


# -- digits -------------------------------------------------------------------------------------


def test_digits_are_told_apart_for_both_numbers():
    lines = [f"{i}e9 {1 / (i + 2):.5e} {100 / (i + 3):.2f}" for i in range(1, 30)]
    found = read("# Hz S MA R 50\n" + "\n".join(lines)).responses.precision
    assert found.form == "magnitude-angle"
    assert found.first.significant == 6
    assert found.second.decimals == 2


def test_full_precision_is_no_rounding():
    lines = [f"{i}e9 {1 / (i + 2):.16e} {1 / (i + 3):.16e}" for i in range(1, 30)]
    assert read("# Hz S RI R 50\n" + "\n".join(lines)).responses.precision is None


def test_rounding_follows_the_scale_of_each_element():
    """H of version 1 has three scales: the rounding is kept as numbers then."""
    lines = [f"{i} " + " ".join(f"{(i + k) / 7:.4f} 0.1234" for k in range(4)) for i in range(1, 9)]
    found = read("# Hz H RI R 50\n" + "\n".join(lines), ".s2p").responses
    assert found.precision is None
    np.testing.assert_allclose(
        found.sample_std / (1e-4 / np.sqrt(12)), [[50, 1, 1, 0.02]] * 8, rtol=1e-12
    )


# -- refusals -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("data", "line", "word"),
    [
        ("1e9 0.5 0\n2e9 0.5 zero", 3, "'zero' is not a number"),
        ("1e9 0.5 0\n2e9 0,5 0", 3, "'0,5' is not a number"),
        ("1e9 0.5 0\n2e9 1_000 0", 3, "'1_000' is not a number"),
        ("1e9 0.5 0\n2e9 nan 0", 3, "not a finite number"),
        ("1e9 0.5 0\n2e9 inf 0", 3, "not a finite number"),
        ("1e9 0.5 0\n2e9 1e999 0", 3, "not a finite number"),
        ("1e9 0.5 0\n\n! x\n2e9 0.5", 5, "2 numbers behind a whole point"),
        ("-1e9 0.5 0\n2e9 0.5 0", 2, "negative frequency"),
        ("1e9 0.5 0 0.5 0", 2, "5 numbers"),
        ("1e9 0.5 0\n[End]", 3, "without [Version]"),
        ("1e9 0.5 0\n2e9 0.5 \xb5", 3, "is not a number"),
    ],
)
def test_refusals_name_the_line(data, line, word):
    with pytest.raises(FormatError) as error:
        read("# Hz S RI R 50\n" + data)
    assert word in str(error.value)
    assert error.value.line == line


def test_a_value_too_large_names_its_line():
    with pytest.raises(FormatError, match="too large") as error:
        read("# Hz S DB R 50\n1e9 1 0\n2e9 99999 0\n")
    assert error.value.line == 3


def test_an_absurd_number_of_ports_takes_no_memory():
    text = "[Version] 2.0\n# Hz S RI R 50\n[Number of Ports] 99999999\n"
    text += "[Number of Frequencies] 1\n[Network Data]\n1 0 0\n[End]\n"
    with pytest.raises(FormatError, match="at most 1000"):
        read(text, ".ts")


def test_foreign_options_are_refused(file):
    with pytest.raises(ArgumentError, match="driven: has no meaning for a Touchstone file"):
        polefit.read(file("# Hz S RI R 50\n1e9 0.5 0\n"), driven="gate2")


def test_a_heading_is_not_an_option_line(file):
    path = file("# freq re im\n1e9 0.5 0\n2e9 0.25 0\n", "data.txt")
    found = read_with_report(path, quantity="scattering")
    assert found.format == "delimited text"


def test_wide_text(file):
    text = "# Hz S RI R 50\n1e9 0.5 0\n"
    for encoding in ("utf-16", "utf-16-le", "utf-8-sig"):
        assert polefit.read(file(text.encode(encoding))).values[0, 0] == 0.5


def test_a_missing_file(tmp_path):
    with pytest.raises(FileError, match="no such file"):
        polefit.read(tmp_path / "none.s1p")
