"""An identification in HDF5: the input responses, the JSON, and the numbers of the fit.

The file begins with the layout of :mod:`polefit.readers.hdf5`, so that :func:`polefit.read_all`
gives back the responses that were judged. Beside it stands what was found. Layout, version 1;
M is the number of poles, K that of all channels in the order of the response sets.

====================================  =============================================================
``/``, ``/responses/…``               as told in :mod:`polefit.readers.hdf5`
``/identification``                   attributes ``schema`` = "polefit.identification",
                                      ``version`` = 1, ``verdict``, ``polefit_version``
``/identification/json``              scalar text: the whole result, valid against the schema
``/identification/fit/0``, ``/1`` …   (N, K_i) complex: the model at the points of each set
``/identification/noise_std/0`` …     (N, K_i) float: standard deviation of the noise of each
                                      complex sample (optional)
``/identification/model``             H_k(s) = Σ residues[m, k] / (s − poles[m]) + constant[k]
                                      + proportional[k] s, with s = 2πj f in rad/s,
                                      times exp(−s delay_s[k])
``…/model/poles``                     (M,) complex, rad/s; conjugates are both listed
``…/model/residues``                  (M, K) complex, unit of the response times rad/s
``…/model/constant``                  (K,) float, unit of the response
``…/model/proportional``              (K,) float, unit of the response per rad/s
``…/model/delay_s``                   (K,) float, seconds: delays in front of the ports, if any
``…/model/channels``                  (K, 2) text: output, input
``/identification/detection``         group (optional): attributes ``damping_ratio``, ``power``
``…/detection/frequency_hz``          (L,) float
``…/detection/residue``               (L, K) float: smallest residue that would have been found
``…/detection/peak``                  (L, K) float: the same as the height of the mode's peak
``…/detection/peak_over_response``    (L, K) float: the same over the response around it
``…/detection/leverage``              (L, K) float, 1/(s·S): NaN but for driving-point impedances
``…/detection/blind_hz``              (B, 2) float: stretches where every channel is blind
``…/detection/channel_blind_hz``      (C, 3) float: column of the channel, from, to
====================================  =============================================================

A confirmation is written as the identification that it rests on, with ``/confirmation`` beside it:
attributes ``schema`` = "polefit.confirmation", ``version`` = 1, ``verdict``; and ``json``, scalar
text, the whole answer.

Complex numbers are compounds {r, i}, as h5py stores them. For example::

    with h5py.File("result.h5") as file:
        result = json.loads(file["identification/json"].asstr()[()])
        poles = file["identification/model/poles"][:]
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from polefit.atomic import whole_file
from polefit.confirmation import Confirmation
from polefit.modes import Detection, Identification, RationalModel
from polefit.readers.hdf5 import put_responses, put_text, put_texts
from polefit.report.confirmation_json import SCHEMA as CONFIRMATION_SCHEMA
from polefit.report.confirmation_json import VERSION as CONFIRMATION_VERSION
from polefit.report.confirmation_json import confirmation_json
from polefit.report.json import SCHEMA, identification_json

if TYPE_CHECKING:
    import h5py

VERSION = 1


def write_identification(path: str | Path, result: Identification) -> None:
    """Write a result with the data behind it, whole or not at all.

    Parameters
    ----------
    path : str or pathlib.Path
        The file to appear.
    result : Identification
        The answer.

    Raises
    ------
    FileError
        If the file cannot be written there.
    """
    _write(path, result, None)


def write_confirmation(path: str | Path, answer: Confirmation) -> None:
    """Write a confirmation with the identification and the data behind it, whole or not at all.

    Parameters
    ----------
    path : str or pathlib.Path
        The file to appear.
    answer : Confirmation
        The answer.

    Raises
    ------
    FileError
        If the file cannot be written there.
    """
    _write(path, answer.identification, answer)


def _write(path: str | Path, result: Identification, answer: Confirmation | None) -> None:
    import h5py

    with whole_file(path) as temporary, h5py.File(temporary, "w") as file:
        put_responses(file, result.responses)
        _put_identification(file.create_group("identification"), result)
        if answer is not None:
            group = file.create_group("confirmation")
            put_text(group, "schema", CONFIRMATION_SCHEMA)
            group.attrs["version"] = CONFIRMATION_VERSION
            put_text(group, "verdict", answer.verdict)
            group.create_dataset("json", data=confirmation_json(answer), dtype=h5py.string_dtype())


def _put_identification(group: h5py.Group, result: Identification) -> None:
    import h5py

    from polefit import __version__

    put_text(group, "schema", SCHEMA)
    group.attrs["version"] = VERSION
    put_text(group, "verdict", result.verdict)
    put_text(group, "polefit_version", __version__)
    group.create_dataset("json", data=identification_json(result), dtype=h5py.string_dtype())
    _put_model(group.create_group("model"), result.model)
    first = 0
    for i, responses in enumerate(result.responses):
        columns = slice(first, first + len(responses.channels))
        first = columns.stop
        curves = result.model.response(responses.frequency_hz)[:, columns]
        group.create_dataset(f"fit/{i}", data=curves)
    for i, std in enumerate(result.noise_std):
        group.create_dataset(f"noise_std/{i}", data=std)
    if result.detection is not None:
        _put_detection(group.create_group("detection"), result.detection)


def _put_model(group: h5py.Group, model: RationalModel) -> None:
    group.create_dataset("poles", data=model.poles)
    group.create_dataset("residues", data=model.residues)
    group.create_dataset("constant", data=model.constant)
    group.create_dataset("proportional", data=model.proportional)
    if model.delay_s is not None:
        group.create_dataset("delay_s", data=model.delay_s)
    put_texts(group, "channels", [(c.output, c.input) for c in model.channels])


def _put_detection(group: h5py.Group, detection: Detection) -> None:
    group.attrs["damping_ratio"] = detection.damping_ratio
    group.attrs["power"] = detection.power
    group.create_dataset("frequency_hz", data=detection.frequency_hz)
    group.create_dataset("residue", data=detection.residue)
    group.create_dataset("peak", data=detection.peak)
    group.create_dataset("peak_over_response", data=detection.relative)
    group.create_dataset("leverage", data=detection.leverage)
    everywhere = np.array(detection.blind_everywhere_hz, dtype=float).reshape(-1, 2)
    group.create_dataset("blind_hz", data=everywhere)
    single = [(k, *ends) for k, own in enumerate(detection.blind_hz) for ends in own]
    group.create_dataset("channel_blind_hz", data=np.array(single, dtype=float).reshape(-1, 3))
