"""HDF5: what is written comes back exactly, others can read and write it, the rest is refused."""

from dataclasses import fields, replace

import h5py
import numpy as np
import pytest

import polefit
from polefit.errors import ArgumentError, FileError, FormatError
from polefit.precision import FrequencyPrecision, Precision, Printed
from polefit.readers import read_with_report
from polefit.readers.hdf5 import FORMAT, VERSION
from polefit.responses import Source


def invented(points=7, names=("gate2", ("drain1", "gate2")), seed=1, **more):
    random = np.random.default_rng(seed)
    values = random.normal(size=(points, len(names), 2)) @ [1, 1j]
    frequency = np.cumsum(random.uniform(1, 2, points)) * 1e9
    return polefit.ResponseSet.from_arrays(
        frequency, values, channels=names, quantity=more.pop("quantity", "impedance"), **more
    )


def everything():
    """A set in which every field holds something unusual."""
    plain = invented(
        names=("gate ✓2", ("Senke\t1", "Ω")), quantity="scattering",
        reference_ohm=(50.0, 75.1), pump_hz=1.7e9 / 3, sample_std=np.full((7, 2), 1e-3 / 3),
    )  # fmt: skip
    return replace(
        plain,
        termination="as ever; port 1 open",
        precision=Precision(
            "decibel-angle", Printed(significant=6), Printed(decimals=3), scale=1 / 3, radians=True
        ),
        source=Source("a file;.s1p", "0" * 64, "Touchstone 1.1", ("one thing", "zweitens: ≤ 3")),
        frequency_precision=FrequencyPrecision(Printed(decimals=3), 1e9 / 3, exact=True),
    )


def same(one, other, *, but=()):
    """Equal in every field, arrays bit for bit."""
    for field in fields(one):
        if field.name in but:
            continue
        a, b = getattr(one, field.name), getattr(other, field.name)
        if isinstance(a, np.ndarray):
            assert a.dtype == b.dtype
            assert a.tobytes() == b.tobytes(), field.name
        else:
            assert a == b, field.name


def test_a_plain_set_comes_back_exactly(tmp_path):
    path = tmp_path / "data.h5"
    data = invented()
    polefit.write_hdf5(path, data)
    found = polefit.read(path)
    same(data, found, but={"source"})
    assert found.source.format == f"HDF5 ({FORMAT} {VERSION})"
    assert len(found.source.sha256) == 64


def test_every_field_comes_back_exactly(tmp_path):
    path = tmp_path / "data.h5"
    data = everything()
    polefit.write_hdf5(path, data)
    found = polefit.read(path)
    same(data, found, but={"source"})
    told = found.source.assumptions
    assert told[0].startswith("first read from a file;.s1p (Touchstone 1.1, sha256 000")
    assert told[1:] == ("one thing", "zweitens: ≤ 3")


@pytest.mark.parametrize("extreme", [5e-324, 1.7976931348623157e308, -0.0, 1 / 3])
def test_extreme_numbers_survive(tmp_path, extreme):
    path = tmp_path / "data.h5"
    data = polefit.ResponseSet.from_arrays(
        [0.0, 5e-324, 1.0], np.array([extreme, 1j * extreme, 1]), channels="n", quantity="transfer"
    )
    polefit.write_hdf5(path, data)
    same(data, polefit.read(path), but={"source"})


def test_a_second_round_changes_nothing_but_the_history(tmp_path):
    polefit.write_hdf5(tmp_path / "1.h5", everything())
    first = polefit.read(tmp_path / "1.h5")
    polefit.write_hdf5(tmp_path / "2.h5", first)
    same(first, polefit.read(tmp_path / "2.h5"), but={"source"})


def test_several_sets_share_a_file(tmp_path):
    path = tmp_path / "probes.h5"
    sets = [invented(points=n, seed=n) for n in (3, 5, 12)]
    polefit.write_hdf5(path, sets)
    for one, other in zip(sets, polefit.read_all(path), strict=True):
        same(one, other, but={"source"})
    with pytest.raises(FormatError, match="3 response sets in one file"):
        polefit.read(path)


def test_nothing_to_write(tmp_path):
    with pytest.raises(ArgumentError, match="at least one"):
        polefit.write_hdf5(tmp_path / "none.h5", [])
    assert not list(tmp_path.iterdir())


def test_a_failed_write_leaves_the_old_file(tmp_path, monkeypatch):
    path = tmp_path / "data.h5"
    polefit.write_hdf5(path, invented())
    before = path.read_bytes()

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("polefit.readers.hdf5.put_texts", fail)
    with pytest.raises(FileError, match="No space left"):
        polefit.write_hdf5(path, invented(seed=2))
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["data.h5"]


def test_h5py_alone_reads_it(tmp_path):
    """The promise of the layout: names and units as documented."""
    path = tmp_path / "data.h5"
    data = everything()
    polefit.write_hdf5(path, data)
    with h5py.File(path) as file:
        assert file.attrs["format"] in (b"polefit.responses", "polefit.responses")
        assert file.attrs["version"] == 1
        group = file["responses/0"]
        assert np.array_equal(group["values"][:], data.values)
        assert np.array_equal(group["frequency_hz"][:], data.frequency_hz)
        assert group["channels"].asstr()[1].tolist() == ["Senke\t1", "Ω"]
        assert group["values"].dtype == np.complex128  # h5py's compound {r, i}


# -- files of others in this layout -------------------------------------------------------------


def by_hand(path, values, frequency=(1e9, 2e9, 3e9), names=(("gate2", "gate2"),), **attributes):
    """Write the layout with nothing but h5py, as its documentation tells."""
    with h5py.File(path, "w") as file:
        file.attrs.update({"format": FORMAT, "version": VERSION})
        group = file.create_group("responses/0")
        group.attrs.update({"quantity": "impedance", **attributes})
        group["frequency_hz"] = np.asarray(frequency)
        group["values"] = values
        group.create_dataset("channels", data=names, dtype=h5py.string_dtype())
    return path


COMPLEX = np.array([[1 + 2j], [3 - 4j], [-5.5j]])


def pairs(names, kind=np.float64):
    table = np.empty(COMPLEX.shape, dtype=[(names[0], kind), (names[1], kind)])
    table[names[0]], table[names[1]] = COMPLEX.real, COMPLEX.imag
    return table


@pytest.mark.parametrize(
    "values",
    [COMPLEX, COMPLEX.astype(">c16"), COMPLEX.astype(np.complex64), pairs(("real", "imag")),
     pairs(("r", "i")), pairs(("real", "imag"), ">f4")],
    ids=["compound", "big-endian", "single", "real-imag", "r-i", "real-imag-single"],
)  # fmt: skip
def test_complex_in_every_usual_way(tmp_path, values):
    found = polefit.read(by_hand(tmp_path / "data.h5", values))
    assert np.array_equal(found.values, COMPLEX)
    assert found.channels == (polefit.Channel("gate2", "gate2"),)


def test_optional_things_may_be_absent_and_extras_present(tmp_path):
    path = by_hand(tmp_path / "data.h5", COMPLEX)
    with h5py.File(path, "a") as file:
        file["my notes"] = "kept"
    found = polefit.read(path)
    assert found.precision is found.sample_std is found.reference_ohm is found.pump_hz is None
    assert found.termination.startswith("every probed port open")


def test_compressed_data_are_read(tmp_path):
    path = tmp_path / "data.h5"
    data = invented(points=500)
    polefit.write_hdf5(path, data)
    with h5py.File(path, "a") as file:
        group = file["responses/0"]
        values = group["values"][:]
        del group["values"]
        group.create_dataset("values", data=values, compression="gzip", shuffle=True)
    assert np.array_equal(polefit.read(path).values, data.values)


def test_a_user_block_before_the_signature(tmp_path):
    path = tmp_path / "data.h5"
    with h5py.File(path, "w", userblock_size=512) as file:
        file.attrs.update({"format": FORMAT, "version": VERSION})
    with pytest.raises(FormatError, match="no group /responses"):
        polefit.read(path)


def test_selection_and_conversion(tmp_path):
    path = tmp_path / "data.h5"
    polefit.write_hdf5(path, invented())
    assert [str(c) for c in polefit.read(path, select="drain1").channels] == ["drain1 ← gate2"]
    square = polefit.ResponseSet.from_arrays(
        [1.0, 2.0], [100.0, 50.0], channels="n", quantity="impedance"
    )
    polefit.write_hdf5(path, square)
    assert polefit.read(path, quantity="admittance").values[:, 0].tolist() == [0.01, 0.02]


# -- refusals -----------------------------------------------------------------------------------


def test_a_file_of_another_program(tmp_path):
    path = tmp_path / "other.h5"
    with h5py.File(path, "w") as file:
        file["measurement/x"] = np.arange(5)
    with pytest.raises(FormatError, match="HDF5 file of another program") as error:
        polefit.read(path)
    assert str(error.value).startswith(str(path))


def test_a_file_of_matlab_is_recognised(tmp_path):
    path = tmp_path / "other.mat"
    with h5py.File(path, "w", userblock_size=512) as file:
        file["x"] = 1
    with path.open("r+b") as handle:
        handle.write(b"MATLAB 7.3 MAT-file")
    with pytest.raises(FormatError, match="MATLAB"):
        polefit.read(path)


def spoil(path, edit):
    with h5py.File(path, "a") as file:
        edit(file)
    return path


def replaced(name, data):
    def edit(file):
        del file[f"responses/0/{name}"]
        file[f"responses/0/{name}"] = data

    return edit


def removed(name):
    def edit(file):
        del file[f"responses/0/{name}"]

    return edit


def attribute(name, value):
    return lambda file: file["responses/0"].attrs.__setitem__(name, value)


def printed_axis(**attributes):
    return lambda file: file.create_group("responses/0/frequency_precision").attrs.update(
        attributes
    )


def linked(link):
    def edit(file):
        del file["responses/0/values"]
        file["responses/0/values"] = link

    return edit


@pytest.mark.parametrize(
    ("edit", "word"),
    [
        (lambda file: file.attrs.__setitem__("version", 2), "layout version 2 is not known"),
        (lambda file: file.attrs.__setitem__("version", "one"), "version"),
        (lambda file: file.attrs.__setitem__("format", "other"), "another program"),
        (removed("values"), "no dataset /responses/0/values"),
        (removed("channels"), "no dataset /responses/0/channels"),
        (replaced("values", np.ones((3, 1))), "not complex"),
        (replaced("values", np.ones(3, complex)), "1 axes instead of 2"),
        (replaced("values", np.ones((4, 1), complex)), "does not fit 3 frequencies"),
        (replaced("values", np.full((3, 1), np.nan + 0j)), "not finite"),
        (replaced("frequency_hz", [1.0, 3.0, 2.0]), "falling"),
        (replaced("frequency_hz", [1.0, 1.0, 2.0]), "repeated"),
        (replaced("frequency_hz", [-1.0, 1.0, 2.0]), "negative"),
        (replaced("frequency_hz", np.array([b"a", b"b", b"c"])), "not real numbers"),
        (replaced("channels", [[1, 2]]), "not text"),
        (replaced("channels", np.array([[b"a"]])), "output and an input"),
        (replaced("channels", np.array([[b"a", b"\xff"]])), "not UTF-8"),
        (attribute("quantity", "voltage"), "'voltage' is not known"),
        (attribute("pump_hz", -1.0), "pump_hz"),
        (attribute("reference_ohm", 0.0), "reference_ohm"),
        (printed_axis(scale_hz=0.0, exact=False), "scale_hz = 0"),
        (printed_axis(scale_hz=1.0, exact=False, significant=-1), "give a count of digits"),
        (printed_axis(scale_hz=1.0), "attribute 'exact' is not one number"),
        (linked(h5py.SoftLink("/responses/0/frequency_hz")), "link to another place"),
        (linked(h5py.ExternalLink("/etc/hostname", "x")), "link to another place"),
    ],
)
def test_refusals_say_what_is_wrong(tmp_path, edit, word):
    path = spoil(by_hand(tmp_path / "data.h5", COMPLEX), edit)
    with pytest.raises(FormatError) as error:
        polefit.read(path)
    assert word in str(error.value)
    assert str(error.value).startswith(f"{path}: ")


def test_a_small_file_that_unpacks_to_gigabytes_is_refused(tmp_path):
    path = by_hand(tmp_path / "data.h5", COMPLEX)

    def edit(file):
        del file["responses/0/values"]
        file["responses/0"].create_dataset(
            "values", shape=(3, 200_000_000), dtype=complex, compression="gzip"
        )

    with pytest.raises(FormatError, match=r"declares \d+ bytes but stores"):
        polefit.read(spoil(path, edit))


def test_a_cut_file(tmp_path):
    path = tmp_path / "data.h5"
    polefit.write_hdf5(path, invented(points=300))
    whole = path.read_bytes()
    for share in (0.1, 0.5, 0.99):
        path.write_bytes(whole[: int(len(whole) * share)])
        with pytest.raises(FormatError) as error:
            polefit.read(path)
        assert "\n" not in str(error.value)


def test_options_without_meaning(tmp_path):
    path = by_hand(tmp_path / "data.h5", COMPLEX)
    with pytest.raises(ArgumentError, match="driven"):
        polefit.read(path, driven="gate2")
    assert read_with_report(path).warnings == ()
