"""What reading a source takes: `python tests/benchmarks/bench_intake.py`.

Prints, for a 4096 x 2048 half ZIP EXR with a warm file cache, the CPU time of reading and of cutting faces as
multiples of the bare read by the `OpenEXR` package; and the peak memory of a process that reads and cuts
8192 x 4096. Threads share the faces' time; reading is on one.
"""

import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import OpenEXR

from skykiln.formats.source_files import read_source
from skykiln.light.faces import extract_faces
from skykiln.light.repair import repair_pixels

SIZES = (512, 1024)


def write_sky(path, height):
    """A gradient with the grain of a camera, half floats."""
    y, x = np.mgrid[0:1 : height * 1j, 0 : 2 : 2 * height * 1j].astype(np.float32)
    grain = np.random.default_rng(1).standard_normal((height, 2 * height, 3), np.float32)
    sky = np.exp(-y[..., None] * np.float32([3, 2.5, 2]))
    pixels = ((sky + 0.1 * np.sin(20 * x)[..., None] + 0.2) * (1 + 0.01 * grain)).astype(np.float16)
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
    OpenEXR.File(header, {"RGB": np.ascontiguousarray(pixels)}).write(str(path))


def cpu_seconds(run, times=5):
    run()
    taken = []
    for _ in range(times):
        start = time.process_time()
        run()
        taken.append(time.process_time() - start)
    return min(taken)


def peak_megabytes(path, size):
    code = (
        "import sys; from pathlib import Path; sys.path[:0] = sys.argv[3:]\n"
        "from bench_intake import panorama, extract_faces\n"
        "extract_faces(panorama(Path(sys.argv[1])), int(sys.argv[2]))\n"
        "print(Path('/proc/self/status').read_text().partition('VmHWM:')[2].split()[0])"
    )
    command = [sys.executable, "-c", code, str(path), str(size), str(Path(__file__).parent)]
    return int(subprocess.run(command, check=True, capture_output=True, text=True).stdout) // 1024


def panorama(path):
    """What the decoding stage does for every source."""
    return repair_pixels(read_source(path).pixels)[0]


def main():
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "sky.exr"
        write_sky(path, 2048)
        bare = cpu_seconds(lambda: OpenEXR.File(str(path)).channels()["RGB"].pixels)
        reading = cpu_seconds(lambda: panorama(path))
        pixels = panorama(path)
        print(f"bare read: {bare * 1000:.0f} ms of CPU time; reading and repair: {reading / bare:.2f} times")
        for size in SIZES:
            faces = cpu_seconds(lambda size=size: extract_faces(pixels, size), 3)
            print(f"and with faces of {size}: {(reading + faces) / bare:.1f} times")
        write_sky(path, 4096)
        print(f"8192 x 4096 with faces of 2048: {peak_megabytes(path, 2048)} MB")


if __name__ == "__main__":
    main()
