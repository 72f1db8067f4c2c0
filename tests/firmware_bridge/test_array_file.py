import json
import random

import numpy as np
import pytest

from firmware_bridge import open_recording
from firmware_bridge.errors import BridgeError
from metro.errors import MidfringeError

RNG = np.random.default_rng(5)
A, B = RNG.normal(size=(2, 500))
T = np.arange(500) / 250.0


def save(path, *arrays, **named):
    (np.savez if named else np.save)(path, *arrays, **named)
    return path


def test_npy_with_one_or_more_columns(tmp_path):
    recording = open_recording(save(tmp_path / "x.npy", A), rate="1 kHz")
    assert (recording.format, recording.length, len(recording.channels)) == ("npy", 500, 1)
    np.testing.assert_array_equal(recording.trace("1").values, A)
    for array in (np.c_[T, A, B], np.c_[T, A, B].T, np.asfortranarray(np.c_[T, A, B])):
        recording = open_recording(save(tmp_path / "x.npy", array))
        assert recording.rate_hz == 250.0
        np.testing.assert_array_equal(recording.trace("3").values, B)


def test_npy_of_counts_and_of_records(tmp_path):
    counts = (A * 1000).astype(np.int16)
    recording = open_recording(save(tmp_path / "x.npy", counts), rate="1 kHz")
    np.testing.assert_array_equal(recording.trace("1").values, counts)
    records = np.zeros(500, dtype=[("t", "f8"), ("pd", "f4")])
    records["t"], records["pd"] = T, A
    recording = open_recording(save(tmp_path / "x.npy", records))
    assert (recording.rate_hz, recording.channels[0].name) == (250.0, "pd")


def test_npz_by_name_with_a_rate_beside(tmp_path):
    path = save(tmp_path / "x.npz", pd=A, drive=B, fs=np.array(4000.0), note=np.array("by hand"))
    recording = open_recording(path)
    assert (recording.format, recording.rate_hz) == ("npz", 4000.0)
    np.testing.assert_array_equal(recording.trace("drive").values, B)
    np.testing.assert_array_equal(recording.trace("1").values, A)
    path = save(tmp_path / "x.npz", time=T, pd=A, short=A[:7])
    recording = open_recording(path)
    assert recording.rate_hz == 250.0
    assert "short: of another length, not read" in recording.remarks


def test_nanosecond_stamps_keep_their_steps(tmp_path):
    stamps = 1_673_605_353_000_000_000 + np.arange(500, dtype=np.int64) * 4_000_000
    recording = open_recording(save(tmp_path / "x.npz", time_ns=stamps, pd=A))
    assert recording.rate_hz == 250.0


def test_hdf5_with_units_and_groups(tmp_path):
    h5py = pytest.importorskip("h5py")
    with h5py.File(tmp_path / "x.h5", "w") as file:
        group = file.create_group("run1")
        group.create_dataset("pd", data=A * 1000).attrs["units"] = "mV"
        group.create_dataset("drive", data=B)
        group.attrs["sample_rate"] = 4000.0
        file["comment"] = "by hand"
    recording = open_recording(tmp_path / "x.h5")
    assert (recording.format, recording.rate_hz) == ("hdf5", 4000.0)
    np.testing.assert_allclose(recording.trace("pd").values, A, rtol=1e-14)
    assert recording.trace("pd").unit == "V"


@pytest.mark.parametrize(
    ("arrays", "reason"),
    [
        ({"a": np.array(["x", "y"])}, "holds no column of real numbers"),
        ({"a": A + 1j}, "holds no column of real numbers"),
        ({"a": np.zeros(0)}, "holds no column of real numbers"),
    ],
)
def test_arrays_without_real_numbers(tmp_path, arrays, reason):
    path = save(tmp_path / "x.npz", **arrays)
    with pytest.raises(BridgeError) as error:
        open_recording(path, rate="1 Hz")
    assert str(error.value) == f"{path} {reason}"


def test_pickle_is_never_read(tmp_path):
    path = tmp_path / "x.npy"
    np.save(path, np.array([{"a": 1}, None], dtype=object), allow_pickle=True)
    with pytest.raises(BridgeError, match=r"cannot be read as NPY: it holds Python objects$"):
        open_recording(path, rate="1 Hz")


def test_damaged_files_are_refused(tmp_path):
    h5py = pytest.importorskip("h5py")
    with h5py.File(tmp_path / "x.h5", "w") as file:
        file["pd"] = A
    whole = {
        "npy": save(tmp_path / "x.npy", A).read_bytes(),
        "npz": save(tmp_path / "x.npz", pd=A).read_bytes(),
        "h5": (tmp_path / "x.h5").read_bytes(),
    }
    for suffix, data in whole.items():
        for cut in (9, 20, len(data) // 2, len(data) - 1):
            path = tmp_path / f"cut.{suffix}"
            path.write_bytes(data[:cut])
            with pytest.raises(BridgeError) as error:
                open_recording(path, rate="1 Hz")
            assert "\n" not in str(error.value)


def test_flipped_bits_raise_nothing_but_our_own_errors(tmp_path):
    h5py = pytest.importorskip("h5py")
    with h5py.File(tmp_path / "x.h5", "w") as file:
        file["t"], file["pd"] = T, A
    save(tmp_path / "x.npy", np.c_[T, A])
    save(tmp_path / "x.npz", t=T, pd=A)
    rng = random.Random(4)  # noqa: S311  # a seeded test
    for suffix in ("npy", "npz", "h5") * 60:
        data = bytearray((tmp_path / f"x.{suffix}").read_bytes())
        for _ in range(rng.randrange(1, 6)):
            data[rng.randrange(min(len(data), rng.choice([130, 3000, 10**6])))] ^= (
                1 << rng.randrange(8)
            )
        path = tmp_path / f"damaged.{suffix}"
        path.write_bytes(data)
        try:
            recording = open_recording(path)
        except MidfringeError:
            continue
        assert next(recording.blocks(100)).values.shape[1] == len(recording.channels)


def test_a_newer_format_is_refused_by_name(tmp_path):
    document = {"version": "2.0", "rate_hz": 1.0, "gaps": []}
    path = save(tmp_path / "x.npz", pd=A, midfringe=np.array(json.dumps(document)))
    with pytest.raises(
        BridgeError, match=r"was written by a newer version \(format 2.0\); this one reads up to 1$"
    ):
        open_recording(path)
