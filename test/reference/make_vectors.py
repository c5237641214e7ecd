#!/usr/bin/env python3
"""Makes the reference vectors that test/reference/scipy.test.ts compares with: numpy and scipy only.

    python3 test/reference/make_vectors.py --seed 1 --out test/reference/vectors/scipy.json

Records are not stored: both sides draw them from a seed with the generator of `uniform` below and add tones, and
only results are kept, some thinned. Each section states what it computes; formulas are written here from the
published sources and the documentation of the functions, not from their code.
"""

import argparse
import json
import sys

import numpy as np
import scipy
from scipy import signal, stats

G = 9.80665
FLAT_TOP = [1, 1.933, 1.286, 0.388, 0.0322]  # ISO 18431-2:2004


def uniform(n, seed):
    """mulberry32, in -0.5..0.5; counter based, so it vectorises."""
    with np.errstate(over="ignore"):
        state = np.uint32(seed) + np.arange(1, n + 1, dtype=np.uint32) * np.uint32(0x6D2B79F5)
        t = (state ^ (state >> np.uint32(15))) * (state | np.uint32(1))
        t ^= t + (t ^ (t >> np.uint32(7))) * (t | np.uint32(61))
        return (t ^ (t >> np.uint32(14))).astype(np.float64) / 2**32 - 0.5


def record(n, rate, seed, tones, offset=0.0):
    x = uniform(n, seed) + offset
    for hz, amplitude in tones:
        x = x + amplitude * np.sin(2 * np.pi * hz * np.arange(n) / rate)
    return x


def next_power_of_two(n):
    return 1 << int(np.ceil(np.log2(n)))


def window(name, n):
    if name == "hann":
        return signal.windows.hann(n, sym=False)
    if name == "flat-top":
        return signal.windows.general_cosine(n, FLAT_TOP, sym=False)
    return signal.windows.boxcar(n, sym=False)


def windows():
    cases = []
    for name in ("rectangular", "hann", "flat-top"):
        for n in (32, 61):
            w = window(name, n)
            enbw = n * np.sum(w**2) / np.sum(w) ** 2
            cases.append({"name": name, "n": n, "values": w.tolist(), "enbw": enbw, "gain": w.mean()})
    return cases


def kaiser(rng):
    attenuations = [21.5, 30, 40, 50, 65, 80, 100, *rng.uniform(22, 130, 5)]
    betas = [{"attenuationDb": a, "beta": signal.kaiser_beta(a)} for a in attenuations]
    designs = []
    for n, beta in ((11, 4.533514120981), (45, 7.85726), (2 * int(rng.integers(8, 40)) + 1, rng.uniform(2, 12))):
        cutoff = rng.uniform(0.05, 0.45)
        taps = signal.firwin(n, cutoff, window=("kaiser", beta), fs=1.0)
        shape = signal.windows.kaiser(n, beta)
        designs.append({"n": n, "beta": beta, "cutoffHz": cutoff, "taps": taps.tolist(), "window": shape.tolist()})
    lengths = []
    for rate, pass_hz, stop_hz, attenuation in ((25600, 2500, 3900, 80), (25600, 1000, 1560, 80), (1, 0.1, 0.13, 96)):
        n, _ = signal.kaiserord(attenuation, (stop_hz - pass_hz) / (rate / 2))
        case = {"rateHz": rate, "passHz": pass_hz, "stopHz": stop_hz, "attenuationDb": attenuation, "taps": n | 1}
        lengths.append(case)
    return {"betas": betas, "designs": designs, "lengths": lengths}


def design_stage(rate, fmax, factor, attenuation):
    """Kaiser for 2 dB more than asked, lengthened by two until freqz sees the asked attenuation."""
    stop = rate / factor - fmax
    n, beta = signal.kaiserord(attenuation + 2, (stop - fmax) / (rate / 2))
    n |= 1
    while True:
        taps = signal.firwin(n, (fmax + stop) / 2, window=("kaiser", beta), fs=rate)
        _, h = signal.freqz(taps, worN=np.linspace(stop, rate / 2, 20000), fs=rate)
        if np.abs(h).max() <= 10 ** (-attenuation / 20):
            break
        n += 2
    taps[np.abs(taps) < 1e-15] = 0
    return np.trim_zeros(taps)


def decimated(seed):
    cases = []
    for rate, factors, fmax in ((40960, (2, 2, 2, 2), 1000), (12000, (2, 2), 1000), (25600, (5, 2), 1000), (48828, (3, 3, 2), 1000)):
        tones = [(0.31 * fmax, 1.0), (3.7 * fmax, 0.5)]
        n = 4000
        y = record(n, rate, seed, tones, 0.25)
        stage_rate = rate
        stages = []
        for factor in factors:
            taps = design_stage(stage_rate, fmax, factor, 80)
            y = np.convolve(y, taps, "valid")[::factor]
            stage_rate /= factor
            stages.append({"factor": factor, "taps": taps[len(taps) // 2 :].tolist()})
        cases.append({"rateHz": rate, "fmaxHz": fmax, "samples": n, "seed": seed, "tones": tones, "offset": 0.25,
                      "stages": stages, "values": y.tolist()})
    return cases


def reach(name):
    """How far a band reaches beyond its edges, in lines: 0.75 of the half main lobe; every bin that it touches counts."""
    return 0.75 * {"rectangular": 1, "hann": 2, "flat-top": 5}[name]


def line_spread(name, n=4096):
    """Second moment of a line through the window, in lines squared, from the transform itself."""
    if name == "rectangular":
        return 0.0
    power = np.abs(np.fft.fft(window(name, n))) ** 2
    d = np.fft.fftfreq(n, 1 / n)
    near = np.abs(d) <= 8
    return float(np.sum(d[near] ** 2 * power[near]) / np.sum(power[near]))


def spectra(seed):
    cases = []
    rate = 2560
    for name in ("rectangular", "hann", "flat-top"):
        for block in (256, 200):
            tones = [(97.3, 0.8), (310.0, 0.2)]
            n = 2048
            x = record(n, rate, seed + 1, tones, 3.0)
            nfft = next_power_of_two(block)
            arguments = dict(fs=rate, window=window(name, block), noverlap=block // 2, nfft=nfft, detrend=False)
            f, density = signal.welch(x - x.mean(), nperseg=block, scaling="density", **arguments)
            _, lines = signal.welch(x - x.mean(), nperseg=block, scaling="spectrum", **arguments)
            power = density * (rate / nfft)
            bands = []
            for low, high in ((100, 400), (50, 1000), (10, 60)):
                r = reach(name) * rate / block
                half = rate / nfft / 2
                inside = (f + half > low - r + 1e-6) & (f - half < high + r - 1e-6)
                spread = line_spread(name) * (rate / block) ** 2
                with np.errstate(divide="ignore"):
                    velocity = np.where(f > 0, (1e3 * G / (2 * np.pi)) ** 2 / (f**2 + 3 * spread), 0)
                    displacement = np.where(f > 0, (1e6 * G / (2 * np.pi) ** 2) ** 2 / (f**4 + 10 * spread * f**2), 0)
                bands.append({"hz": [low, high], "rms": np.sqrt(power[inside].sum()),
                              "velocityMmS": np.sqrt((power * velocity)[inside].sum()),
                              "displacementUm": np.sqrt((power * displacement)[inside][f[inside] > 0].sum())})
            cases.append({"window": name, "blockSamples": block, "rateHz": rate, "samples": n, "seed": seed + 1,
                          "tones": tones, "offset": 3.0, "meanSquare": power.tolist(), "lines": lines.tolist(), "bands": bands})
    return cases


def velocity(seed):
    """Velocity of a long noise record, integrated whole with a brick-wall band: agrees but for windows and edges."""
    rate, n, band = 2560, 2560 * 40, (10, 1000)
    tones = [(24.7, 2.0), (49.4, 1.0)]
    x = record(n, rate, seed + 2, tones)
    spectrum = np.fft.rfft(x - x.mean())
    f = np.fft.rfftfreq(n, 1 / rate)
    inside = (f >= band[0]) & (f <= band[1])
    kept = np.zeros_like(spectrum)
    kept[inside] = spectrum[inside] / (2j * np.pi * f[inside])
    v = 1e3 * G * np.fft.irfft(kept, n)
    return {"rateHz": rate, "samples": n, "seed": seed + 2, "tones": tones, "bandHz": band, "velocityMmS": v.std()}


def faded(x, cut):
    y = x - x.mean()
    fade = cut // 2
    gain = 0.5 - 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / fade)
    y[:fade] *= gain
    y[len(y) - fade :] *= gain[::-1]
    return y


def band_passed(y, rate, band):
    size = next_power_of_two(len(y))
    spectrum = np.fft.rfft(y, size)
    f = np.fft.rfftfreq(size, 1 / rate)
    spectrum[(f < band[0]) | (f > band[1]) | (f == 0)] = 0
    return np.fft.irfft(spectrum, size), spectrum


def envelopes(seed):
    """Squared envelope as the squared modulus of scipy's hilbert() of the band-passed record."""
    cases = []
    for rate, n, band, step in ((40960, 20000, (500, 16000), 37), (12000, 6000, (1500, 3000), 11), (40960, 100000, (2000, 6000), 199)):
        tones = [(sum(band) / 2.3, 0.6), (sum(band) / 2.2, 0.3)]
        x = record(n, rate, seed + 3, tones, -1.0)
        cut = int(np.ceil(0.05 * rate))
        y, _ = band_passed(faded(x, cut), rate, band)
        square = np.abs(signal.hilbert(y)) ** 2
        at = np.arange(0, n - cut, 16 * step)
        at = at[at >= cut + 32]
        cases.append({"rateHz": rate, "samples": n, "seed": seed + 3, "tones": tones, "offset": -1.0, "bandHz": band,
                      "at": at.tolist(), "values": square[at].tolist()})
    return cases


def spectral_kurtosis(seed):
    """E|c|^4/(E|c|^2)^2 - 2 of the complex envelope of each band, sampled at its width; Antoni 2007."""
    rate, n, cut = 40960, 30000, 2048
    x = record(n, rate, seed + 4, [(7000, 0.3)])
    size = next_power_of_two(n)
    spectrum = np.fft.fft(faded(x, cut), size)
    cases = []
    for level, bands in ((1, 2), (1.6, 3), (2, 4), (2.6, 6)):
        for b in range(bands):
            low, high = b * rate / 2 / bands, (b + 1) * rate / 2 / bands
            k = np.arange(max(1, int(np.ceil(low * size / rate - 1e-9))), min(size // 2 - 1, int(np.floor(high * size / rate + 1e-9))) + 1)
            short = next_power_of_two(len(k))
            c = np.fft.ifft(spectrum[k], short)
            ratio = size // short
            inner = np.abs(c[int(np.ceil(cut / ratio)) : (n - 1 - cut) // ratio + 1]) ** 2
            cases.append({"level": level, "bandHz": [low, high], "kurtosis": np.mean(inner**2) / np.mean(inner) ** 2 - 2})
    return {"rateHz": rate, "samples": n, "seed": seed + 4, "tones": [(7000, 0.3)], "bands": cases}


def statistics(seed):
    cases = []
    for offset, tones in ((0.0, []), (12.5, [(50, 1.5)]), (-3.0, [(50, 0.1), (333, 3)])):
        x = record(5000, 5000, seed + 5, tones, offset)
        cases.append({"samples": 5000, "rateHz": 5000, "seed": seed + 5, "tones": tones, "offset": offset, "mean": x.mean(),
                      "rms": x.std(), "peak": np.abs(x - x.mean()).max(), "peakToPeak": np.ptp(x),
                      "kurtosis": stats.kurtosis(x, fisher=False), "skewness": stats.skew(x)})
    return cases


def medians(seed):
    x = record(300, 300, seed + 6, [(3, 2)])
    half = 12
    return {"samples": 300, "rateHz": 300, "seed": seed + 6, "tones": [(3, 2)], "halfWidth": half,
            "inner": signal.medfilt(x, 2 * half + 1)[half:-half].tolist()}


def main():
    parser = argparse.ArgumentParser()
    parser.add_argument("--seed", type=int, required=True)
    parser.add_argument("--out", default="-")
    arguments = parser.parse_args()
    seed = arguments.seed
    vectors = {
        "seed": seed, "numpy": np.__version__, "scipy": scipy.__version__,
        "windows": windows(), "kaiser": kaiser(np.random.default_rng(seed)), "decimated": decimated(seed),
        "spectra": spectra(seed), "velocity": velocity(seed), "envelopes": envelopes(seed),
        "spectralKurtosis": spectral_kurtosis(seed), "statistics": statistics(seed), "medians": medians(seed),
    }
    text = json.dumps(vectors, separators=(",", ":"), default=float) + "\n"
    if arguments.out == "-":
        sys.stdout.write(text)
    else:
        with open(arguments.out, "w", encoding="utf-8") as file:
            file.write(text)


if __name__ == "__main__":
    main()
