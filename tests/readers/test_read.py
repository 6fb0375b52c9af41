"""``polefit.read``: formats told apart by content, the source kept, and bad input in one line."""

import hashlib
import os
import time

import h5py
import numpy as np
import pytest

import polefit
from polefit.cli import main
from polefit.errors import ArgumentError, FileError, FormatError, PolefitError
from polefit.readers import read_with_report

TOUCHSTONE = "# Hz Z RI R 1\n1e9 1 2\n2e9 3 4\n3e9 5 6\n"
TEXT = "freq (Hz),Re(Z(a)),Im(Z(a))\n1e9,1,2\n2e9,3,4\n3e9,5,6\n"
RAW = (
    "Title: x\nDate: none\nPlotname: AC Analysis\nFlags: complex\nNo. Variables: 2\n"
    "No. Points: 3\nVariables:\n\t0\tfrequency\tfrequency\n\t1\tv(a)\tvoltage\nValues:\n"
    " 0\t1e9,0\n\t1,2\n 1\t2e9,0\n\t3,4\n 2\t3e9,0\n\t5,6\n"
)
VALUES = [1 + 2j, 3 + 4j, 5 + 6j]


@pytest.fixture
def file(tmp_path):
    def write(content, name="a.txt"):
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write


def refusal(path, **options):
    """The only line that a user sees, which names the file and nothing twice."""
    with pytest.raises(PolefitError) as error:
        polefit.read(path, **options)
    text = str(error.value)
    assert "\n" not in text
    assert text.count(str(path)) == 1
    assert text.startswith(f"{path}: ")
    assert "; " in text, "no remedy"
    return error.value


# -- recognition --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("content", "name", "format_", "options"),
    [
        (TOUCHSTONE, "a.s1p", "Touchstone 1.0", {}),
        (TOUCHSTONE, "a.txt", "Touchstone 1.0", {}),
        ("! first\n\n" + TOUCHSTONE, "a.dat", "Touchstone 1.0", {}),
        (TEXT, "a.csv", "delimited text", {}),
        (TEXT, "a.s1p", "delimited text", {}),
        (TEXT, "a.raw", "delimited text", {}),
        (RAW, "a.raw", "SPICE raw (ASCII)", {"driven": "a"}),
        (RAW, "a.s1p", "SPICE raw (ASCII)", {"driven": "a"}),
    ],
)
def test_the_content_decides(file, content, name, format_, options):
    report = read_with_report(file(content, name), **options)
    assert report.format == format_
    assert report.responses.values[:, 0].tolist() == VALUES
    assert report.responses.frequency_hz.tolist() == [1e9, 2e9, 3e9]


def test_a_name_against_the_content_is_told(file):
    told = read_with_report(file(TEXT, "a.s1p")).responses.source.assumptions
    assert any("named .s1p, but begins with a heading" in text for text in told)


def test_hdf5_by_its_signature(tmp_path):
    path = tmp_path / "a.s1p"
    data = polefit.ResponseSet.from_arrays([1.0], [2j], channels="a", quantity="impedance")
    polefit.write_hdf5(path, data)
    assert polefit.read(path).values[0, 0] == 2j


def test_the_source_is_kept(file):
    path = file(TOUCHSTONE.replace("R 1", "R 50"), "gate2.s1p")
    source = polefit.read(path).source
    assert source.file == str(path)
    assert source.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    assert source.format == "Touchstone 1.0"
    assert any("normalised to 50" in text for text in source.assumptions)


def test_paths_of_every_kind(file):
    path = file(TOUCHSTONE, "gate2.s1p")
    assert np.array_equal(polefit.read(str(path)).values, polefit.read(path).values)


def test_large_files_are_mapped_and_read_the_same(file, monkeypatch):
    contents = {"a.s1p": TOUCHSTONE, "a.csv": TEXT, "a.raw": RAW}
    monkeypatch.setattr("polefit.readers._MAPPED_BYTES", 10)
    for name, content in contents.items():
        options = {"driven": "a"} if name == "a.raw" else {}
        found = polefit.read(file(content, name), **options)
        assert found.values[:, 0].tolist() == VALUES


def test_a_single_response_set_of_every_other_format(file):
    (only,) = polefit.read_all(file(TOUCHSTONE, "a.s1p"))
    assert only.values[:, 0].tolist() == VALUES


def test_a_file_that_ends_within_a_line_is_told(file):
    for content, name in ((TOUCHSTONE, "a.s1p"), (TEXT, "a.csv")):
        assert read_with_report(file(content, name)).warnings == ()
        told = read_with_report(file(content[:-1], name)).warnings
        assert any("no line end behind the last line" in text for text in told)
        wide = file(content.encode("utf-16"), name)
        assert read_with_report(wide).warnings == ()


def test_unknown_options_are_errors(file):
    path = file(TOUCHSTONE, "a.s1p")
    with pytest.raises(TypeError):
        polefit.read(path, unit="GHz")
    with pytest.raises(ArgumentError, match="quantity: 'voltage' is not known"):
        polefit.read(path, quantity="voltage")
    with pytest.raises(ArgumentError, match="reference_ohm"):
        polefit.read(path, reference_ohm=-50)


# -- bad input ----------------------------------------------------------------------------------

BAD = {
    "empty": ("", "empty"),
    "blank": ("\n \n", "blank lines|no data"),
    "zeros": (b"\0" * 100_000, "zero bytes"),
    "noise": (bytes(np.random.default_rng(1).integers(0, 256, 5000, np.uint8)), "not a text"),
    "picture": (b"\x89PNG\r\n\x1a\n" + bytes(range(256)) * 9, "not a text|binary"),
    "pickle": (b"\x80\x04\x95\x10\x00\x00\x00\x00\x00\x00\x00\x8c\x05hello\x94.", "not a text"),
    "zip": (b"PK\x03\x04" + bytes(range(256)) * 4, "not a text|binary"),
    "prose": ("Dear colleague,\nthe results follow.\n", "no row of numbers|no option line"),
    "html": ("<html><body>404 not found</body></html>\n", "no row of numbers|no option line"),
    "json": ('{"frequency": [1, 2], "z": [3, 4]}\n', "no row of numbers|no option line"),
    "header only": ("# Hz Z RI R 50\n", "no data|no row"),
    "wrong magic": (b"\x89HDX\r\n\x1a\n" + b"\0" * 600, "not a text|binary"),
    "magic only": (b"\x89HDF\r\n\x1a\n", "HDF5"),
    "cut magic": (b"\x89HDF\r\n\x1a\n" + b"\0" * 600, "HDF5"),
    "utf-32": (TEXT.encode("utf-32"), "UTF-32"),
    "nul within": (TEXT.replace("3,4", "3\0,4"), "not a text|binary"),
}


@pytest.mark.parametrize("suffix", [".s1p", ".csv", ".raw", ".h5", ""])
@pytest.mark.parametrize("case", BAD)
def test_what_is_no_response_file(file, case, suffix):
    content, words = BAD[case]
    error = refusal(file(content, f"bad{suffix}"))
    assert isinstance(error, FileError)
    assert any(word in str(error) for word in words.split("|")), str(error)


@pytest.mark.parametrize(
    ("content", "name", "line", "word"),
    [
        (TOUCHSTONE.replace("3 4", "3 nan"), "a.s1p", 3, "not a finite"),
        (TOUCHSTONE.replace("3 4", "3 four"), "a.s1p", 3, "'four' is not a number"),
        (TOUCHSTONE.replace("3e9", "2e9"), "a.s1p", 4, "repeated"),
        (TOUCHSTONE.replace("3e9", "1.5e9"), "a.s1p", 4, "falling"),
        (TOUCHSTONE.replace("3 4", "3 4 5 6"), "a.s1p", 3, "5 numbers"),
        (TOUCHSTONE[:-4], "a.s1p", 4, "1 numbers|a point"),
        (TEXT.replace("3,4", "3,nan"), "a.csv", 3, "not finite"),
        (TEXT.replace("3,4", "3,four"), "a.csv", 3, "text where numbers"),
        (TEXT.replace("3e9", "2e9"), "a.csv", 4, "comes again"),
        (TEXT.replace("3e9", "1.5e9"), "a.csv", 4, "falls"),
        (TEXT.replace("3,4", "3,4,5"), "a.csv", 3, "4 numbers"),
        (TEXT[:-3], "a.csv", 4, "2 numbers|text where"),
        (RAW.replace("3,4", "3,nan"), "a.raw", 13, "not finite"),
        (RAW.replace("3,4", "3,four"), "a.raw", 14, "text where numbers"),
        (RAW.replace("3e9", "2e9"), "a.raw", 15, "comes again"),
        (RAW.replace("3e9", "1.5e9"), "a.raw", 15, "below the one before"),
        (RAW.replace("Points: 3", "Points: 4"), "a.raw", 17, "4 points are declared, 3 present"),
        (RAW[:-3], "a.raw", 16, "cut|no line end|text where"),
    ],
)
def test_damage_names_file_line_and_remedy(file, content, name, line, word):
    error = refusal(file(content, name), driven="a" if name == "a.raw" else None)
    assert error.line == line
    assert f": line {line}: " in str(error)
    assert any(part in str(error) for part in word.split("|")), str(error)


@pytest.mark.parametrize(
    ("content", "name", "options", "word"),
    [
        (RAW, "a.raw", {"driven": "x"}, "driven: the file holds no node voltage called 'x'"),
        (RAW, "a.raw", {"driven": "a", "node": "b"}, "node: "),
        (RAW, "a.raw", {"driven": "a", "select": ["x"]}, "select: "),
        (TEXT, "a.csv", {"select": ["x"]}, "select: no channel 'x'"),
        (TEXT, "a.csv", {"scaling": "absolute"}, "scaling: has no meaning"),
        (TOUCHSTONE, "a.s1p", {"driven": "x"}, "driven: has no meaning"),
        (TOUCHSTONE, "a.s1p", {"select": "x"}, "select: no channel 'x'"),
        (TOUCHSTONE, "a.s1p", {"quantity": "scattering"}, "reference_ohm: needed"),
        (TOUCHSTONE, "a.s1p", {"quantity": "transfer"}, "quantity: "),
    ],
)
def test_options_that_do_not_fit_name_the_file(file, content, name, options, word):
    error = refusal(file(content, name), **options)
    assert isinstance(error, ArgumentError)
    assert word in str(error)


def test_a_band_without_points_names_the_file_and_reads_well(file):
    path = file(TOUCHSTONE, "a.s1p")
    with pytest.raises(ArgumentError) as error:
        polefit.read(path).in_band(2e10, 3e10)
    assert str(error.value) == (
        f"{path}: band_hz: no point between 20 GHz and 30 GHz; the data cover 1 GHz to 3 GHz"
    )


def test_a_directory(tmp_path):
    assert "is a directory" in str(refusal(tmp_path))


def test_a_missing_file(tmp_path):
    assert "there is no such file" in str(refusal(tmp_path / "none.s1p"))


def test_names_that_are_none(tmp_path):
    with pytest.raises(FileError):
        polefit.read(tmp_path / "nul\0.s1p")
    with pytest.raises(FileError):
        polefit.read("")


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no named pipes here")
def test_a_pipe_is_not_waited_for(tmp_path):
    path = tmp_path / "pipe.s1p"
    os.mkfifo(path)
    assert "not a regular file" in str(refusal(path))


@pytest.mark.parametrize("name", ["zeros.s1p", "zeros.csv", "zeros.raw", "zeros.h5"])
def test_two_gigabytes_of_zeros_are_refused_at_once(tmp_path, name):
    path = tmp_path / name
    with path.open("wb") as handle:
        handle.truncate(2 << 30)
    start = time.process_time()
    assert "zero bytes" in str(refusal(path))
    # Reading them takes seconds; looking at the first 64 KiB does not.
    assert time.process_time() - start < 0.5


def test_zeros_behind_a_good_beginning_are_refused_quickly(tmp_path):
    for name, content in (("a.s1p", TOUCHSTONE), ("a.csv", TEXT), ("a.raw", RAW)):
        path = tmp_path / name
        with path.open("wb") as handle:
            handle.write(content.encode())
            handle.truncate(1 << 30)
        start = time.process_time()
        refusal(path, driven="a" if name == "a.raw" else None)
        assert time.process_time() - start < 2.0
        path.unlink()


def test_an_endless_line_is_refused_quickly(tmp_path):
    """Such as a large JSON file in one line."""
    for name in ("a.s1p", "a.csv", "a.raw"):
        path = tmp_path / name
        path.write_bytes(b"[1.0, 2.0, " * 2_000_000)
        start = time.process_time()
        refusal(path)
        assert time.process_time() - start < 3.0
        path.unlink()


def test_hdf5_of_another_program(tmp_path):
    path = tmp_path / "other.h5"
    with h5py.File(path, "w") as handle:
        handle["x"] = np.arange(3)
    error = refusal(path)
    assert isinstance(error, FormatError)
    assert "another program" in str(error)


def test_a_hostile_file_name_stays_on_one_line(file):
    path = file("", "two\nlines\x1b[31m.s1p")
    with pytest.raises(FileError) as error:
        polefit.read(path)
    assert "\n" not in str(error.value)
    assert "\x1b" not in str(error.value)


@pytest.mark.parametrize("command", ["inspect", "identify"])
def test_the_command_line_ends_with_status_2(file, capsys, command):
    path = file(TOUCHSTONE.replace("3 4", "3 x"), "a.s1p")
    assert main([command, str(path)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err == (
        f"polefit: error: {path}: line 3: 'x' is not a number; "
        "write numbers with a decimal point, comments behind '!'\n"
    )


# -- a periodic drive ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("content", "options"), [(TOUCHSTONE, {}), (TEXT, {}), (RAW, {"driven": "a"})]
)
def test_every_format_can_be_told_its_drive(file, content, options):
    found = polefit.read(file(content), pump_hz=2e9, **options)
    assert found.pump_hz == 2e9
    assert found.values[:, 0].tolist() == VALUES


def test_a_drive_that_the_file_states_stands(file, tmp_path):
    stated = polefit.read(file(TEXT), pump_hz=2e9)
    path = tmp_path / "a.h5"
    polefit.write_hdf5(path, stated)
    assert polefit.read(path).pump_hz == polefit.read(path, pump_hz=2e9).pump_hz == 2e9
    assert "states a drive at 2000000000 Hz" in str(refusal(path, pump_hz=3e9))


def test_driven_data_are_not_converted(file):
    """Conversion at one frequency leaves out the loads that the other sidebands see."""
    path = file("# Hz S RI R 50\n1e9 0.1 0.2\n2e9 0.3 0.4\n", "a.s1p")
    assert "pumped" in str(refusal(path, pump_hz=2e9, quantity="impedance"))


@pytest.mark.parametrize("value", [0, -1e9, float("nan"), "fast"])
def test_a_drive_is_a_positive_frequency(file, value):
    with pytest.raises(ArgumentError, match=r"pump_hz: .* give hertz"):
        polefit.read(file(TEXT), pump_hz=value)
