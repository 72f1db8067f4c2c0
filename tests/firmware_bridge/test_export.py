import csv
import json

import numpy as np
import pytest
from click.testing import CliRunner
from real_data import real_data

from firmware_bridge import open_recording
from firmware_bridge.channel import Channel
from firmware_bridge.errors import BridgeError
from firmware_bridge.export import export_recording
from firmware_bridge.gap import Gap
from firmware_bridge.span import Span
from firmware_bridge.trace import Recording
from metro.commandline import cli, run
from metro.output import OutputError

RATE_HZ = 48000.0 * (1 + 7.3e-6)
N = 70000  # more than a block


class Made(Recording):
    """A recording in memory: a gap, over-range values, names that need care."""

    def __init__(self, names=("photodiode", "drive"), units=("V", "1")):
        rng = np.random.default_rng(2)
        self.values = rng.normal(size=(N, len(names))) * 10.0 ** rng.integers(-20, 20, (N, 1))
        self.values[1000:1234] = np.nan
        self.values[66000, 0] = self.values[66001, 0] = np.nan
        super().__init__(
            path="made",
            format="mfr",
            rate_hz=RATE_HZ,
            rate_u_hz=0.25,
            channels=[Channel(n, u) for n, u in zip(names, units, strict=True)],
            length=N,
            gaps=[Gap(1000, 234, exact=False, length_u=0.5)],
            over_range=2,
            start_unix_s=1.7e9,
        )

    def read(self, channels, start, stop):
        over = sum(start <= k < stop for k in (66000, 66001)) * (0 in channels)
        return Span(self.values[start:stop, list(channels)], over)


@pytest.mark.parametrize("suffix", ["csv", "npz", "h5"])
def test_the_way_there_and_back_is_exact(tmp_path, suffix):
    made, path = Made(), tmp_path / f"x.{suffix}"
    assert export_recording(made, path) == N
    back = open_recording(path)
    assert (back.rate_hz, back.length, back.columns) == (RATE_HZ, N, (2, 3))
    assert [(c.name, c.unit) for c in back.channels] == [("photodiode", "V"), ("drive", "1")]
    for name in ("photodiode", "drive"):
        np.testing.assert_array_equal(back.trace(name).values, made.trace(name).values)
    if suffix == "csv":  # says where values are missing, not why
        assert [(gap.index, gap.length) for gap in back.gaps] == [(1000, 234)]
    else:
        assert (back.gaps, back.rate_u_hz, back.over_range) == (made.gaps, 0.25, 2)
        assert (back.trace("1" if suffix == "x" else "2").over_range) == 2
    again = tmp_path / f"again.{suffix}"
    export_recording(back, again)
    assert open_recording(again).rate_hz == RATE_HZ


@pytest.mark.parametrize("suffix", ["csv", "npz", "h5"])
@pytest.mark.parametrize(
    "names", [("a,b", 'say "x"'), ("file", "time_s"), ("U (mV)", "3"), ("x/y", "µ"), ("a", "a")]
)
def test_names_come_back(tmp_path, suffix, names):
    made, path = Made(names, ("1", "V")), tmp_path / f"x.{suffix}"
    export_recording(made, path, from_s=0.0, to_s=0.01)
    back = open_recording(path)
    expected = [n.replace("/", "∕") if suffix == "h5" else n for n in names]
    if names[0] == names[1]:
        expected[1] = "a (2)"
    expected = ["time_s (2)" if n == "time_s" else n for n in expected]
    assert [c.name for c in back.channels] == expected
    assert [c.unit for c in back.channels] == ["1", "V"]


@pytest.mark.parametrize("suffix", ["csv", "npz", "h5"])
def test_a_stretch_keeps_its_place_in_time_and_its_gaps(tmp_path, suffix):
    made, path = Made(), tmp_path / f"x.{suffix}"
    samples = export_recording(
        made, path, channels=["drive"], from_s=1100 / RATE_HZ, to_s=5000 / RATE_HZ
    )
    back = open_recording(path)
    assert samples == back.length == 3900
    assert (back.rate_hz, len(back.channels)) == (RATE_HZ, 1)
    assert back.start_s == pytest.approx(1100 / RATE_HZ, rel=1e-15)
    assert [(gap.index, gap.length) for gap in back.gaps] == [(0, 134)]
    np.testing.assert_array_equal(back.trace("drive").values, made.values[1100:5000, 1])


def test_csv_opens_in_pandas_and_numpy_alone(tmp_path):
    made, path = Made(), tmp_path / "x.csv"
    export_recording(made, path)
    with path.open(newline="") as file:
        assert next(csv.reader(file)) == ["time_s", "photodiode [V]", "drive"]
    table = np.loadtxt(path, delimiter=",", skiprows=1)
    np.testing.assert_array_equal(table[:, 1:], made.values)
    np.testing.assert_array_equal(table[:, 0], np.arange(N) / RATE_HZ)
    assert np.genfromtxt(path, delimiter=",", names=True, max_rows=5).dtype.names[0] == "time_s"
    pandas = pytest.importorskip("pandas")
    frame = pandas.read_csv(path)
    # Its parser may be off by a few last bits, depending on the version.
    np.testing.assert_allclose(frame["photodiode [V]"].to_numpy(), made.values[:, 0], rtol=1e-14)


def test_npz_opens_in_numpy_alone(tmp_path):
    made, path = Made(), tmp_path / "x.npz"
    export_recording(made, path)
    with np.load(path) as archive:
        assert archive.files == ["time_s", "photodiode", "drive", "midfringe"]
        np.testing.assert_array_equal(archive["photodiode"], made.values[:, 0])
        document = json.loads(str(archive["midfringe"]))
    assert document["version"] == "1.0"
    assert document["units"] == {"time_s": "s", "photodiode": "V", "drive": "1"}
    assert document["gaps"] == [[1000, 234, 0.5]]
    assert (document["over_range"], document["start_unix_s"]) == (2, 1.7e9)


def test_hdf5_opens_in_h5py_alone(tmp_path):
    h5py = pytest.importorskip("h5py")
    made, path = Made(), tmp_path / "x.h5"
    export_recording(made, path)
    with h5py.File(path) as file:
        np.testing.assert_array_equal(file["drive"][:], made.values[:, 1])
        assert file["photodiode"].attrs["unit"] == "V"
        assert file.attrs["rate_hz"] == RATE_HZ
        assert file.attrs["gaps"].tolist() == [[1000, 234]]


def test_npy_holds_records_with_the_times(tmp_path):
    made, path = Made(), tmp_path / "x.npy"
    assert export_recording(made, path) == N
    rows = np.load(path)
    assert rows.dtype.names == ("time_s", "photodiode [V]", "drive")
    np.testing.assert_array_equal(rows["photodiode [V]"], made.values[:, 0])
    back = open_recording(path)
    assert back.rate_hz == pytest.approx(RATE_HZ, rel=1e-9)
    assert [(c.name, c.unit) for c in back.channels] == [("photodiode", "V"), ("drive", "1")]
    np.testing.assert_array_equal(back.trace("drive").values, made.values[:, 1])


def test_what_stands_beside_is_kept(tmp_path):
    path = tmp_path / "x.npz"
    export_recording(Made(), path, beside={"uncertainty": {"systematic": 0.01}})
    kept = json.loads(str(np.load(path)["midfringe"]))
    assert kept["uncertainty"] == {"systematic": 0.01}


def test_files_that_cannot_be_written(tmp_path):
    made, path = Made(), tmp_path / "x.csv"
    path.write_text("precious")
    with pytest.raises(OutputError, match=r"exists; give --overwrite to replace it$"):
        export_recording(made, path)
    assert path.read_text() == "precious"
    assert export_recording(made, path, to_s=0.001, overwrite=True) == 49
    with pytest.raises(
        BridgeError, match=r"^--out must end in .csv, .npy, .npz or .h5, got '.*x.wav'$"
    ):
        export_recording(made, tmp_path / "x.wav")


def test_the_recording_itself_is_never_replaced(capsys, tmp_path):
    path = tmp_path / "x.csv"
    text = "".join(f"{k / 100},{k}\n" for k in range(50))
    path.write_text(text)
    code = run(["export", str(path), "--out", str(path), "--overwrite"])
    captured = capsys.readouterr()
    assert (code, captured.out, captured.err.count("\n")) == (2, "", 1)
    with pytest.raises(OutputError, match=r"x\.csv: it is read for this itself"):
        export_recording(open_recording(path), path, overwrite=True)
    assert path.read_text() == text


def test_the_command(tmp_path):
    source, out = tmp_path / "in.txt", tmp_path / "out.npz"
    source.write_text("".join(f"{k / 100},{k}\n" for k in range(50)))
    result = CliRunner().invoke(cli, ["export", str(source), "--out", str(out), "--json"])
    assert result.exit_code == 0
    assert json.loads(result.stdout) == {"file": str(out), "samples": 50, "missing": 0}
    assert "taken as time in seconds" in result.stderr
    result = CliRunner().invoke(
        cli,
        [
            "export",
            str(source),
            "--out",
            str(out),
            "--overwrite",
            "--from",
            "100ms",
            "--to",
            "0.2 s",
            "-q",
        ],
    )
    assert (result.exit_code, result.output) == (0, "")
    assert open_recording(out).length == 10


@pytest.mark.parametrize(
    ("stretch", "missing"), [([], 5), (["--to", "220ms"], 2), (["--from", "1s"], 0)]
)
def test_the_command_says_how_many_samples_are_missing(capsys, tmp_path, stretch, missing):
    source = tmp_path / "in.csv"
    rows = (k for k in range(200) if not 20 <= k < 25)
    source.write_text("t (s),u (V)\n" + "".join(f"{k / 100},{k % 7}\n" for k in rows))
    for form in (["--json"], []):
        line = ["export", str(source), "--out", str(tmp_path / "x.npz"), "--overwrite"]
        assert run([*line, *stretch, *form]) == 0
        said = capsys.readouterr().out
        if form:
            assert json.loads(said)["missing"] == missing
        else:
            assert said.endswith(f" samples ({missing} missing)\n")


def test_a_real_stream_keeps_its_gaps(tmp_path):
    recording = open_recording(real_data("two-detector-motor-scan/Task_8_6.txt"))
    for suffix in ("csv", "npz", "h5"):
        path = tmp_path / f"x.{suffix}"
        export_recording(recording, path)
        back = open_recording(path)
        assert (back.rate_hz, back.length) == (recording.rate_hz, recording.length)
        assert [(g.index, g.length) for g in back.gaps] == [
            (g.index, g.length) for g in recording.gaps
        ]
        np.testing.assert_array_equal(back.trace("2").values, recording.trace("1").values)
