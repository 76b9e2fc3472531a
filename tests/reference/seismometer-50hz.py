"""Makes the two seismometer recordings of seismometer-50hz.md, and measures their mains line without notchwright.

    python seismometer-50hz.py convert FOLDER   # needs ObsPy 1.5.1; FOLDER is its unpacked source
    python seismometer-50hz.py measure          # needs NumPy alone
"""

import pathlib
import sys
import wave

import numpy as np

HERE = pathlib.Path(__file__).parent
# Name, file in the package, channels in this order, steps of 16 bit a count, pieces of so many seconds.
RECORDINGS = [
    ("seismometer-50hz-three-axes", "obspy/io/seisan/tests/data/2005-07-23-1452-04S.CER___030", "BHZ BHN BHE", 4),
    ("seismometer-50hz-one-axis", "obspy/io/mseed/tests/data/timingquality.mseed", "EHE", 32),
]
PIECE_S = 10.0


def convert(folder):
    import obspy

    for name, file, channels, steps in RECORDINGS:
        traces = [obspy.read(str(folder / file)).select(channel=channel)[0] for channel in channels.split()]
        samples = np.stack([trace.data for trace in traces], axis=1) * steps
        assert np.abs(samples).max() < 32768
        with wave.open(str(HERE / f"{name}.wav"), "wb") as out:
            out.setparams((len(traces), 2, round(traces[0].stats.sampling_rate), 0, "NONE", ""))
            out.writeframes(samples.astype("<i2").tobytes())


def read(name):
    with wave.open(str(HERE / f"{name}.wav"), "rb") as recording:
        samples = np.frombuffer(recording.readframes(recording.getnframes()), "<i2").astype(float)
        return recording.getframerate(), samples.reshape(-1, recording.getnchannels()) / 32768


def left_over(frequency_hz, piece, time_s):
    """The piece less its best sine of this frequency and a slow trend; and that sine's amplitude."""
    slow = np.vander(2 * time_s / time_s[-1] - 1, 4)
    turns = 2 * np.pi * frequency_hz * time_s
    columns = np.column_stack([np.cos(turns), np.sin(turns), slow])
    fit = np.linalg.lstsq(columns, piece, rcond=None)[0]
    return piece - columns @ fit, np.hypot(fit[0], fit[1])


def fit(piece, rate):
    """The least-squares frequency of a piece, and its standard error from the noise within 2 Hz of the line."""
    time_s = np.arange(len(piece)) / rate
    low, high = 49.8, 50.2
    for _ in range(5):
        grid = np.linspace(low, high, 41)
        best = int(np.argmin([np.sum(left_over(f, piece, time_s)[0] ** 2) for f in grid]))
        low, high = grid[max(best - 1, 0)], grid[min(best + 1, 40)]
    rest, amplitude = left_over(grid[best], piece, time_s)
    window = np.hanning(len(rest))
    density = 2 * np.abs(np.fft.rfft(rest * window)) ** 2 / (rate * np.sum(window**2))
    near = np.abs(np.fft.rfftfreq(len(rest), 1 / rate) - grid[best]) < 2
    # Cramér and Rao: var ω = 12 S / (A² T³), S the one-sided density of the noise.
    error_hz = np.sqrt(12 * density[near].mean() / (amplitude**2 * time_s[-1] ** 3)) / (2 * np.pi)
    return grid[best], error_hz


def measure():
    for name, *_ in RECORDINGS:
        rate, samples = read(name)
        # Differences of neighbours: the ground's slow motion would else drown the line.
        samples = np.diff(samples, axis=0)
        length = round(PIECE_S * rate)
        starts = range(0, len(samples) - length + 1, length)
        fits = np.array([[fit(c[s : s + length], rate) for s in starts] for c in samples.T])
        weights = fits[:, :, 1] ** -2.0
        joint, error = np.sum(weights * fits[:, :, 0], axis=0) / weights.sum(axis=0), weights.sum(axis=0) ** -0.5
        print(name)
        for channel in fits:
            mean, of_mean = channel[:, 0].mean(), np.sqrt(np.sum(channel[:, 1] ** 2)) / len(channel)
            print(f"  a channel's mean {mean:.4f} ± {of_mean:.4f} Hz, a piece's error {np.median(channel[:, 1]):.4f}")
        print(f"  all: mean {joint.mean():.4f} ± {np.sqrt(np.sum(error**2)) / len(error):.4f} Hz, deviation {joint.std():.4f}")
        print("  pieces", ", ".join(f"{f:.4f}" for f in joint))
        print("  errors", ", ".join(f"{e:.4f}" for e in error))
        if len(fits) > 1:
            print("  pieces' chi-square", np.round((weights * (fits[:, :, 0] - joint) ** 2).sum(axis=0), 1))


if __name__ == "__main__":
    convert(pathlib.Path(sys.argv[2])) if sys.argv[1] == "convert" else measure()
