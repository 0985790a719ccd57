#!/usr/bin/python3
"""Times the road from a scattering law to scale heights: benchmark_transport.py FOLDER [--build DIR] [--repeats N] [--quick].

Writes a markdown table to stdout. The job: 96 x 96 cells, electrons, positrons and protons at 16 energies per decade over six decades,
8 radio and 24 gamma-ray channels, one linear law without limiter, heights. Its rival is the same scheme in SciPy
(tests/oracle/scipy_transport.py), which marches two kinds of particles and stops there: no protons, losses, secondaries or maps. Further:
how the march grows with cells and energies (tests/bench/transport_march.cpp, `cmake --build build --target bench_transport_march`), and
two laws side by side on two threads against two copies of the program with one thread each. Processor seconds of whole processes are
compared where one thread works, because they suffer least from other work on the machine, which should be idle all the same."""
import argparse
import os
import pathlib
import shutil
import subprocess
import sys
import time

SOURCE = pathlib.Path(__file__).resolve().parents[1]
sys.dont_write_bytecode = True
sys.path.insert(0, str(SOURCE / "scripts"))
import benchmark  # noqa: E402

FREQUENCIES = [1e8 * 100 ** (i / 7) for i in range(8)]  # Hz
ENERGIES = [0.1 * 1e4 ** (i / 23) for i in range(24)]  # GeV
JOB = ["grid.cells_r=96", "grid.cells_z=96", "transport.bins_per_decade=16", "transport.energy_from=100 MeV", "transport.energy_to=100 TeV",
       "transport.headroom=1", "transport.limiter=none", "radio.frequencies=" + ", ".join(f"{f:.10g} Hz" for f in FREQUENCIES),
       "gamma.energies=" + ", ".join(f"{e:.10g} GeV" for e in ENERGIES), "accuracy.estimate=false", "map.pixel=5 arcsec",
       'heights.models=["exponential"]', "heights.strips=1"]
WIND = ["transport.wind.kind=linear", "transport.wind.speed=100 km s-1"]


def load():
    return f"{os.getloadavg()[0]:.1f}"


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("folder", type=pathlib.Path)
    parser.add_argument("--build", type=pathlib.Path, default=SOURCE / "build", help="folder of the built program")
    parser.add_argument("--repeats", type=int, default=3)
    parser.add_argument("--quick", action="store_true", help="small problems, to try the script")
    options = parser.parse_args()
    options.folder.mkdir(parents=True, exist_ok=True)
    program, march = options.build / "aureole", options.build / "tests" / "bench_transport_march"
    cells, nodes = (24, 25) if options.quick else (96, 97)
    job = JOB + (["grid.cells_r=24", "grid.cells_z=24", "transport.bins_per_decade=4"] if options.quick else [])
    scenario = options.folder / "scattering_laws.toml"
    scenario.write_text(subprocess.run([program, "scenario", "scattering_laws"], capture_output=True, text=True, check=True).stdout)
    before = load()

    def command(folder, laws, threads, more=()):
        quoted = ", ".join(f'"{law}"' for law in laws)
        sets = [word for setting in [*job, f"transport.laws=[{quoted}]", *more] for word in ("--set", setting)]
        return [program, "predict", scenario, "-o", options.folder / folder, "-v", "--force", "--threads", threads, *sets]

    def timed(*arguments):
        shutil.rmtree(options.folder / arguments[0], ignore_errors=True)
        times = benchmark.Times(command(*arguments), options.repeats)
        solved = [float(line.split()[-2]) for line in times.text.splitlines() if ": transport: " in line]
        return times, solved

    def copies(first, second):
        """Wall seconds of two copies side by side."""
        best = float("inf")
        for _ in range(options.repeats):
            start = time.perf_counter()
            running = [subprocess.Popen([str(word) for word in command(f"copy_{law}", [law], 1)], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
                       for law in (first, second)]
            if any(process.wait() not in (0, 5) for process in running):
                raise SystemExit("benchmark_transport.py: a copy failed")
            best = min(best, time.perf_counter() - start)
        return best

    def processor(*words):
        """Best processor seconds of whole processes."""
        return min(benchmark.Times(words, options.repeats).cpu)

    def scipy(windy, n, k):
        words = ["/usr/bin/python3", SOURCE / "tests" / "oracle" / "scipy_transport.py", windy, n, k]
        return benchmark.Times(words, 1, environment=dict(os.environ, OPENBLAS_NUM_THREADS="1")).cpu[0]

    print("| one law, one thread, processor seconds | job | of it transport (wall) | memory (MB) | SciPy, march of two kinds alone | SciPy over job |")
    print("|---|---|---|---|---|---|")
    marched = {}
    for name, more, windy in (("no wind", (), 0), ("wind", WIND, 1)):
        times, solved = timed("job", ["with_rigidity"], 1, more)
        marched[windy] = scipy(windy, cells, nodes)
        print(f"| {name} | {min(times.cpu):.2f} | {solved[0]:.2f} | {times.memory:.0f} | {marched[windy]:.1f} "
              f"| {marched[windy] / min(times.cpu):.1f} |", flush=True)

    print("\n| two laws | wall, best (s) |\n|---|---|")
    pair = ["with_rigidity", "everywhere_alike"]
    both, _ = timed("both", pair, 2)
    apart = copies(*pair)
    print(f"| one run on two threads | {both.best():.2f} |\n| two runs at once with one thread each | {apart:.2f} |")
    print(f"| ratio | {both.best() / apart:.2f} |", flush=True)

    print("\n| march of two kinds, one thread, processor seconds | no wind | wind | SciPy, no wind | SciPy, wind |\n|---|---|---|---|---|")
    for n, k in ((cells // 2, nodes), (cells, nodes), (2 * cells, nodes), (cells, 2 * nodes - 1)):
        here = [processor(march, windy, 1, n, k) for windy in (0, 1)]
        rival = ["", ""]
        if (n, k) == (cells, nodes):
            rival = [f"{marched[windy]:.1f} ({marched[windy] / here[windy]:.0f} times)" for windy in (0, 1)]
        print(f"| {n} x {n} cells, {k} energies | {here[0]:.3f} | {here[1]:.3f} | {rival[0]} | {rival[1]} |", flush=True)
    version = subprocess.run([program, "--version"], capture_output=True, text=True).stdout.strip()
    print(f"\n{benchmark.processor()}, {os.cpu_count()} processors; {version}; load {before} before, {load()} at the end; "
          f"best of {options.repeats} runs, SciPy once.")


if __name__ == "__main__":
    main()
