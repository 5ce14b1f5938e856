"""The same work as a run, as a scientist would script it with SciPy and OpenCV: what Lull's speed is measured against.

Read, repair hot pixels, score by the variance of the Laplacian of the smoothed frame and by its peak, register by FFT
cross-correlation with a sub-pixel peak, make the reference anew from the best frames, register all again, and average the
best 10 %. Frames are shared out between processes (each library is held to one thread); reads are sequential through a
memory map; transforms are real, single precision and limited to a window about the target; nothing is kept per frame but
its figures.

Serves one request a line on stdin, so that libraries and processes are warm and only the work is timed:
  {"file": PATH, "offset": BYTES, "width": W, "height": H, "frames": N, "window": PX, "blur": PX}
and answers {"seconds": S, "passes": {…}, "checksum": V, "dx": […], "dy": […]}.
"""
import json
import os
import sys
import time

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import multiprocessing

import cv2
import numpy as np
from scipy import fft
from skimage.filters import window as taper

cv2.setNumThreads(1)
BATCH = 32
KEEP = 0.10
REFERENCE = 0.02
SURVEY = 64


def frames_of(job):
    shape = (job["frames"], job["height"], job["width"])
    return np.memmap(job["file"], dtype="<u2", mode="r", offset=job["offset"], shape=shape)


def hot_pixels(sample):
    """Pixels that stand out of their surroundings in the median of the surveyed frames."""
    middle = np.median(sample, axis=0).astype(np.float32)
    excess = middle - cv2.medianBlur(middle, 3)
    scatter = 1.4826 * np.median(np.abs(excess)) + 1e-6
    return np.argwhere(excess > 12 * max(scatter, 1.0))


def repair(frame, hot):
    height, width = frame.shape
    for y, x in hot:
        frame[y, x] = 0.25 * (frame[y, max(x - 1, 0)] + frame[y, min(x + 1, width - 1)]
                              + frame[max(y - 1, 0), x] + frame[min(y + 1, height - 1), x])
    return frame


def cut(frame, x, y, side, out):
    """A window about (x, y), less the median of its border, in `out`; its corner."""
    height, width = frame.shape
    x0 = min(max(x - side // 2, 0), width - side)
    y0 = min(max(y - side // 2, 0), height - side)
    part = frame[y0:y0 + side, x0:x0 + side]
    border = 0.25 * (part[0].mean() + part[-1].mean() + part[:, 0].mean() + part[:, -1].mean())
    np.subtract(part, border, out=out)
    return x0, y0


def subpixel(row):
    """Vertex of the parabola through three samples, from the middle one."""
    a, b, c = row
    bend = a - 2 * b + c
    return 0.0 if bend >= 0 else float(0.5 * (a - c) / bend)


def peak_of(map_):
    side = map_.shape[0]
    y, x = divmod(int(map_.argmax()), side)
    sx = subpixel((map_[y, x - 1], map_[y, x], map_[y, (x + 1) % side]))
    sy = subpixel((map_[y - 1, x], map_[y, x], map_[(y + 1) % side, x]))
    return (x if x < side // 2 else x - side) + sx, (y if y < side // 2 else y - side) + sy


def shifts_of(windows, pattern, weight):
    spectra = fft.rfft2(windows * weight, workers=1)
    spectra *= pattern
    return [peak_of(map_) for map_ in fft.irfft2(spectra, s=windows.shape[1:], workers=1)]


def pattern_of(reference, weight):
    return np.conj(fft.rfft2(reference * weight)).astype(np.complex64)


def judge(job, first, last, hot, pattern, corner):
    """Scores, places and, where there is a pattern, shifts of frames [first, last)."""
    frames, side = frames_of(job), job["window"]
    weight = taper(("tukey", 0.12), (side, side)).astype(np.float32)
    windows = np.empty((BATCH, side, side), np.float32)
    rows = np.empty((last - first, 6))
    smooth = np.empty(frames.shape[1:], np.float32)
    for start in range(first, last, BATCH):
        stop = min(start + BATCH, last)
        corners = []
        for i in range(start, stop):
            frame = repair(frames[i].astype(np.float32), hot)
            cv2.GaussianBlur(frame, (0, 0), job["blur"], dst=smooth)
            laplacian = cv2.Laplacian(smooth, cv2.CV_32F, ksize=1)
            _, deviation = cv2.meanStdDev(laplacian)
            _, top, _, (x, y) = cv2.minMaxLoc(smooth)
            flux = cv2.sumElems(frame)[0]
            rows[i - first, :4] = deviation[0, 0] ** 2 / flux ** 2, top / flux, x, y
            corners.append(cut(frame, x, y, side, windows[i - start]))
        for k, (dx, dy) in enumerate(shifts_of(windows[:stop - start], pattern, weight)):
            rows[start - first + k, 4:] = corner[0] - corners[k][0] - dx, corner[1] - corners[k][1] - dy
    return rows


def register(job, first, last, hot, places, pattern, corner):
    frames, side = frames_of(job), job["window"]
    weight = taper(("tukey", 0.12), (side, side)).astype(np.float32)
    windows = np.empty((BATCH, side, side), np.float32)
    shifts = np.empty((last - first, 2))
    for start in range(first, last, BATCH):
        stop = min(start + BATCH, last)
        corners = []
        for i in range(start, stop):
            x, y = places[i - first]
            corners.append(cut(repair(frames[i].astype(np.float32), hot), int(x), int(y), side, windows[i - start]))
        for k, (dx, dy) in enumerate(shifts_of(windows[:stop - start], pattern, weight)):
            shifts[start - first + k] = corner[0] - corners[k][0] - dx, corner[1] - corners[k][1] - dy
    return shifts


def add(job, which, shifts, hot):
    """Sum of some frames, shifted by cubic interpolation."""
    frames = frames_of(job)
    height, width = frames.shape[1:]
    total = np.zeros((height, width), np.float64)
    for i, (dx, dy) in zip(which, shifts):
        move = np.float32([[1, 0, dx], [0, 1, dy]])
        frame = repair(frames[i].astype(np.float32), hot)
        cv2.accumulate(cv2.warpAffine(frame, move, (width, height), flags=cv2.INTER_CUBIC, borderMode=cv2.BORDER_REPLICATE), total)
    return total


def run(job, pool, processes):
    began = time.perf_counter()
    frames, n, side = frames_of(job), job["frames"], job["window"]
    sample = np.stack([frames[i] for i in np.linspace(0, n - 1, min(SURVEY, n)).astype(int)])
    hot = hot_pixels(sample)
    best = max((repair(one.astype(np.float32), hot) for one in sample), key=lambda one: cv2.GaussianBlur(one, (0, 0), job["blur"]).max() / one.sum())
    weight = taper(("tukey", 0.12), (side, side)).astype(np.float32)

    def reference(image):
        _, _, _, (x, y) = cv2.minMaxLoc(cv2.GaussianBlur(image, (0, 0), job["blur"]))
        window = np.empty((side, side), np.float32)
        corner = cut(image, x, y, side, window)
        return pattern_of(window, weight), corner

    def shared(count):
        edges = np.linspace(0, count, processes + 1).astype(int)
        return list(zip(edges[:-1], edges[1:]))

    marks = {"survey": time.perf_counter() - began}
    pattern, corner = reference(best)
    parts = pool.starmap(judge, [(job, a, b, hot, pattern, corner) for a, b in shared(n)])
    rows = np.concatenate(parts)
    order = np.argsort(-rows[:, 1], kind="stable")
    marks["grade"] = time.perf_counter() - began

    def stack(count, shifts):
        which = np.sort(order[:count])
        sums = pool.starmap(add, [(job, which[a:b], shifts[which[a:b]], hot) for a, b in shared(count)])
        return sum(sums) / count

    pattern, corner = reference(stack(max(1, round(REFERENCE * n)), rows[:, 4:]).astype(np.float32))
    shifts = np.concatenate(pool.starmap(register, [(job, a, b, hot, rows[a:b, 2:4], pattern, corner) for a, b in shared(n)]))
    marks["refine"] = time.perf_counter() - began
    result = stack(max(1, round(KEEP * n)), shifts)
    seconds = time.perf_counter() - began
    return {"seconds": seconds, "passes": marks, "checksum": float(result.sum()), "dx": shifts[:, 0].tolist(), "dy": shifts[:, 1].tolist()}


def main():
    processes = int(sys.argv[1]) if len(sys.argv) > 1 else 2
    with multiprocessing.Pool(processes) as pool:
        print(json.dumps({"ready": True, "numpy": np.__version__, "opencv": cv2.__version__}), flush=True)
        for line in sys.stdin:
            print(json.dumps(run(json.loads(line), pool, processes)), flush=True)


if __name__ == "__main__":
    main()
