#!/usr/bin/python3
"""Times the program on an invented galaxy of 128^3 cells and 64 energies: benchmark.py FOLDER [--cells N] [--energies N] [--repeats N].

Writes a markdown table to stdout. FOLDER gets the grid file (1.1 GB; it is kept and used again) and the results of the runs, which are
removed. Timed are `aureole predict` (16 gamma-ray channels, 8 radio frequencies, 512 x 512 pixels), the NumPy pipeline of tests/oracle
and the bare loop of tests/bench, built by `cmake --build build --target bench_bare_loop`. The machine should be idle. The oracle needs a
threaded BLAS (Debian: libopenblas0-pthread) to be a fair rival; which one NumPy has loaded is printed.
"""
import argparse
import os
import pathlib
import platform
import re
import shutil
import statistics
import subprocess
import sys
import time

SOURCE = pathlib.Path(__file__).resolve().parents[1]
sys.dont_write_bytecode = True
sys.path.insert(0, str(SOURCE / "tests" / "bench"))

FREQUENCIES = [1e8 * 100 ** (i / 7) for i in range(8)]  # Hz
ENERGIES = [0.01 * 1e5 ** (i / 15) for i in range(16)]  # GeV
PIXELS, PIXEL_KPC, DISTANCE_KPC = 512, 0.1, 10000.0

SCENARIO = f"""
input.grid = "GRID"
radiation.component.dust = {{ temperature = "40 K", value = "0.3 eV cm-3" }}
radiation.component.stars = {{ temperature = "4000 K", value = "0.5 eV cm-3" }}
[radio]
frequencies = [{', '.join(f'"{f:.10g} Hz"' for f in FREQUENCIES)}]
unit = "MJy/sr"
[gamma]
energies = [{', '.join(f'"{e:.10g} GeV"' for e in ENERGIES)}]
[view]
inclination = "85 deg"
distance = "10 Mpc"
[map]
pixel = "{PIXEL_KPC / DISTANCE_KPC!r} rad"
width = "{PIXELS * PIXEL_KPC / DISTANCE_KPC * (1 - 1e-9)!r} rad"
height = "{PIXELS * PIXEL_KPC / DISTANCE_KPC * (1 - 1e-9)!r} rad"
spectral_index = false
[heights]
strips = 1
models = ["exponential"]
inclination = "naive"
"""
SAME_WORK = ["emission.bremsstrahlung=false", "map.polarisation=false", "accuracy.estimate=false"]
ALL = ["emission.bremsstrahlung=true", "map.polarisation=true", "accuracy.estimate=true"]


class Times:
    """Of one or more runs of a command: wall and processor seconds, largest resident memory in MB."""

    def __init__(self, command, repeats, before=lambda: None, environment=None):
        self.wall, self.cpu, self.memory = [], [], 0.0
        for _ in range(repeats):
            before()
            start = time.perf_counter()
            with subprocess.Popen([str(c) for c in command], stdout=subprocess.PIPE, stderr=subprocess.STDOUT, env=environment) as process:
                text = process.stdout.read()
                _, status, usage = os.wait4(process.pid, 0)
                process.returncode = os.waitstatus_to_exitcode(status)
            self.wall.append(time.perf_counter() - start)
            if process.returncode != 0:
                raise SystemExit(f"benchmark.py: {' '.join(map(str, command))}\n{text.decode()}")
            self.cpu.append(usage.ru_utime + usage.ru_stime)
            self.memory = max(self.memory, usage.ru_maxrss / 1024)
            self.text = text.decode()

    def best(self):
        return min(self.wall)


def blas():
    """The BLAS that NumPy loads, read from the memory map of a Python that multiplies matrices."""
    code = ("import numpy, re\nnumpy.ones((9, 9)) @ numpy.ones((9, 9))\n"
            "print(*sorted({l.split()[-1] for l in open('/proc/self/maps') if re.search('blas|mkl|blis|atlas', l.split()[-1])}))")
    paths = subprocess.run(["/usr/bin/python3", "-c", code], capture_output=True, text=True, check=True).stdout.split()
    found = [p for p in paths if re.search(r"/(lib)?[^/]*(blas|mkl|blis|atlas)[^/]*\.so", p)]
    return ", ".join(found) or "none"


def processor():
    for line in pathlib.Path("/proc/cpuinfo").read_text().splitlines():
        if line.startswith("model name"):
            return line.split(":", 1)[1].strip()
    return platform.machine()


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("folder", type=pathlib.Path)
    parser.add_argument("--build", type=pathlib.Path, default=SOURCE / "build", help="folder of the built program")
    parser.add_argument("--cells", type=int, default=128)
    parser.add_argument("--energies", type=int, default=64)
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--no-oracle", action="store_true", help="leave out the NumPy pipeline")
    options = parser.parse_args()
    options.folder.mkdir(parents=True, exist_ok=True)
    grid = options.folder / f"grid_{options.cells}_{options.energies}.fits"
    if not grid.exists():
        import make_grid
        part = grid.with_suffix(".part")
        make_grid.main(str(part), options.cells, options.energies)
        part.rename(grid)
    scenario = options.folder / "benchmark.toml"
    scenario.write_text(SCENARIO.replace("GRID", grid.name))
    results = options.folder / "benchmark_results"

    def predict(settings, *flags):
        sets = [word for setting in settings for word in ("--set", setting)]
        command = [options.build / "aureole", "predict", scenario, "-o", results, "-q", *sets, *flags]
        times = Times(command, options.repeats, lambda: shutil.rmtree(results, ignore_errors=True))
        shutil.rmtree(results, ignore_errors=True)
        return times

    subprocess.run(["cat", grid], stdout=subprocess.DEVNULL, check=True)  # into the page cache
    rows = [("predict, same work as NumPy without bremsstrahlung, 2 threads", predict(SAME_WORK, "--threads", 2)),
            ("the same, 1 thread", predict(SAME_WORK, "--threads", 1)),
            ("the same, 2 threads, --reproducible", predict(SAME_WORK, "--threads", 2, "--reproducible")),
            ("predict with bremsstrahlung, 2 threads", predict(["emission.bremsstrahlung=true", *SAME_WORK[1:]], "--threads", 2)),
            ("predict with bremsstrahlung, polarisation and error estimate, 2 threads", predict(ALL, "--threads", 2)),
            ("the same, 1 thread", predict(ALL, "--threads", 1))]
    loop = options.build / "tests" / "bench_bare_loop"
    bare = None
    if loop.exists():
        times = Times([loop, grid, 2, options.repeats], 1)
        bare = [float(line.split()[0]) for line in times.text.splitlines()]
    oracle = None
    if not options.no_oracle:
        command = ["/usr/bin/python3", SOURCE / "tests" / "oracle" / "numpy_pipeline.py", grid, options.folder / "oracle.npz", "--frequencies",
                   *(f"{f:.10g}" for f in FREQUENCIES), "--energies", *(f"{e:.10g}" for e in ENERGIES), "--radiation", "2.7255", "40:0.3",
                   "4000:0.5", "--inclination", "85", "--distance", DISTANCE_KPC, "--pixels", PIXELS, "--pixel-size", PIXEL_KPC, "--rows"]
        oracle = Times(command, 1, environment=dict(os.environ, OPENBLAS_NUM_THREADS="2"))
        (options.folder / "oracle.npz").unlink()

    print(f"{processor()}, {os.cpu_count()} processors; load {os.getloadavg()[0]:.2f} at the end; "
          f"{subprocess.run([options.build / 'aureole', '--version'], capture_output=True, text=True).stdout.strip()}")
    print(f"{options.cells}^3 cells, {options.energies} energies of electrons and of protons, file {grid.stat().st_size / 1e9:.2f} GB in the "
          f"page cache; {len(ENERGIES)} gamma-ray channels, {len(FREQUENCIES)} radio frequencies, {PIXELS} x {PIXELS} pixels; "
          f"{options.repeats} runs")
    print(f"BLAS of NumPy: {blas()}")
    print("\n| run | wall, best (s) | wall, median (s) | processor, best (s) | memory (MB) |\n|---|---|---|---|---|")
    for name, times in rows + ([("NumPy pipeline (tests/oracle), bremsstrahlung included", oracle)] if oracle else []):
        print(f"| {name} | {times.best():.2f} | {statistics.median(times.wall):.2f} | {min(times.cpu):.2f} | {times.memory:.0f} |")
    if bare:
        print(f"| bare loop, 2 threads | {min(bare):.2f} | {statistics.median(bare):.2f} | | |")
    print("\n| ratio of best wall times | |\n|---|---|")
    if oracle:
        print(f"| NumPy pipeline / predict with bremsstrahlung | {oracle.best() / rows[3][1].best():.1f} |")
    if bare:
        print(f"| predict, first row / bare loop | {rows[0][1].best() / min(bare):.2f} |")
        print(f"| predict with bremsstrahlung / bare loop | {rows[3][1].best() / min(bare):.2f} |")
    print(f"| 1 thread / 2 threads, first row | {rows[1][1].best() / rows[0][1].best():.2f} |")
    print(f"| 1 thread / 2 threads, with everything | {rows[5][1].best() / rows[4][1].best():.2f} |")
    print(f"| --reproducible / first row | {rows[2][1].best() / rows[0][1].best():.2f} |")
    print(f"| with bremsstrahlung, polarisation and error estimate / first row | {rows[4][1].best() / rows[0][1].best():.2f} |")


if __name__ == "__main__":
    main()
