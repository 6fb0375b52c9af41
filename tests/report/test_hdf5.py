"""The result in HDF5: data, JSON and fit, readable with h5py alone."""

import json
from dataclasses import replace

import h5py
import jsonschema
import numpy as np
import pytest
from invented_results import example

import polefit
from polefit.errors import FileError
from polefit.report.hdf5 import write_identification
from polefit.report.json import identification_schema


@pytest.fixture
def written(tmp_path):
    result = example("unstable", points=41)
    noise = tuple(np.abs(r.values) * 1e-6 for r in result.responses)
    result = replace(result, noise_std=noise)
    path = tmp_path / "deep" / "result.h5"
    write_identification(path, result)
    return result, path


def test_the_json_is_the_contract(written):
    result, path = written
    with h5py.File(path) as file:
        group = file["identification"]
        document = json.loads(group["json"].asstr()[()])
        assert group.attrs["version"] == 1
        assert group.attrs["verdict"] in (b"unstable", "unstable")
    jsonschema.Draft202012Validator(identification_schema()).validate(document)
    assert document == json.loads(json.dumps(result.to_dict()))


def test_the_model_and_its_curves(written):
    """The stored poles and residues give the stored curves, by the formula in the layout."""
    result, path = written
    with h5py.File(path) as file:
        model = {name: item[()] for name, item in file["identification/model"].items()}
        names = file["identification/model/channels"].asstr()[()]
        curves = [file[f"identification/fit/{i}"][:] for i in range(len(result.responses))]
        frequency = [file[f"responses/{i}/frequency_hz"][:] for i in range(len(curves))]
    assert names.tolist() == [[c.output, c.input] for c in result.channels]
    assert np.array_equal(model["poles"], result.model.poles)
    first = 0
    for f, curve in zip(frequency, curves, strict=True):
        s = 2j * np.pi * f
        k = slice(first, first := first + curve.shape[1])
        expected = (1 / (s[:, None] - model["poles"])) @ model["residues"][:, k]
        expected += model["constant"][k] + s[:, None] * model["proportional"][k]
        np.testing.assert_allclose(curve, expected, rtol=1e-12)
    assert first == len(result.channels)


def test_the_responses_come_back(written):
    result, path = written
    for one, other in zip(result.responses, polefit.read_all(path), strict=True):
        assert np.array_equal(one.values, other.values)
        assert np.array_equal(one.frequency_hz, other.frequency_hz)
        assert one.channels == other.channels
        assert one.precision == other.precision


def test_detection_and_noise_are_kept(written):
    result, path = written
    with h5py.File(path) as file:
        stored = file["identification/detection"]
        assert np.array_equal(stored["residue"][:], result.detection.residue)
        assert np.array_equal(stored["peak"][:], result.detection.peak)
        assert np.array_equal(stored["peak_over_response"][:], result.detection.relative)
        assert np.array_equal(stored["leverage"][:], result.detection.leverage)
        assert stored["blind_hz"].shape == (0, 2)
        assert stored["channel_blind_hz"].shape == (0, 3)
        assert stored.attrs["power"] == result.detection.power
        for i, std in enumerate(result.noise_std):
            assert np.array_equal(file[f"identification/noise_std/{i}"][:], std)


def test_blind_stretches_are_kept(unstable, tmp_path):
    blind = ((1e8, 2e8),)
    several = (blind, ((1e8, 3e8), (1e9, 2e9)), blind, blind, blind)
    found = replace(unstable.detection, blind_hz=several, blind_everywhere_hz=blind)
    write_identification(tmp_path / "blind.h5", replace(unstable, detection=found))
    with h5py.File(tmp_path / "blind.h5") as file:
        stored = file["identification/detection"]
        assert stored["blind_hz"][:].tolist() == [[1e8, 2e8]]
        assert stored["channel_blind_hz"][:3].tolist() == [
            [0, 1e8, 2e8], [1, 1e8, 3e8], [1, 1e9, 2e9],
        ]  # fmt: skip


def test_what_is_not_known_is_left_out(written, tmp_path):
    result, _ = written
    write_identification(tmp_path / "less.h5", replace(result, noise_std=(), detection=None))
    with h5py.File(tmp_path / "less.h5") as file:
        assert {"noise_std", "detection"}.isdisjoint(file["identification"])


def test_whole_or_not_at_all(written, monkeypatch, tmp_path):
    _, path = written
    before = path.read_bytes()

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("polefit.report.hdf5._put_model", fail)
    with pytest.raises(FileError, match="No space left"):
        write_identification(path, example("stable", points=11))
    assert path.read_bytes() == before
    assert [p.name for p in path.parent.iterdir()] == ["result.h5"]
