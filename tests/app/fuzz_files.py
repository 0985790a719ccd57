#!/usr/bin/python3
"""Damages grid files, maps and scenarios at random and lets the program look at them: fuzz_files.py AUREOLE SOURCE_DIR [ROUNDS [SEED]].

Whatever the input, the program must end by itself with one of its exit codes; a signal or a hang is a failure, and the file that caused it is
kept. 120 rounds by default; thousands by hand."""
import pathlib
import random
import subprocess
import sys
import tempfile

PROGRAM, SOURCE = pathlib.Path(sys.argv[1]).resolve(), pathlib.Path(sys.argv[2]).resolve()
ROUNDS = int(sys.argv[3]) if len(sys.argv) > 3 else 120
SEED = int(sys.argv[4]) if len(sys.argv) > 4 else 20261201
sys.path.insert(0, str(SOURCE / "tests" / "bench"))
sys.dont_write_bytecode = True
import make_grid  # noqa: E402


def damaged(data, draw):
    """A copy with bytes changed, cut, doubled or swapped; header cards are hit more often than their share of the file."""
    data = bytearray(data)
    for _ in range(draw.choice((1, 1, 2, 5, 30))):
        kind = draw.randrange(6)
        place = draw.randrange(len(data))
        if kind == 0:
            data[place] = draw.randrange(256)
        elif kind == 1:
            data[place] ^= 1 << draw.randrange(8)
        elif kind == 2 and len(data) > 100:
            del data[draw.randrange(1, len(data)):]
        elif kind == 3:
            length = draw.randrange(1, 200)
            data[place:place] = data[place:place + length]
        elif kind == 4:
            block = 2880 * draw.randrange(max(1, len(data) // 2880))
            card = block + 80 * draw.randrange(36)
            if card + 80 <= len(data):
                text = draw.choice((b"NAXIS1  =           2147483647", b"NAXIS2  = -5", b"BITPIX  =  99", b"XTENSION= 'TABLE'", b"END",
                                    b"BSCALE  = NaN", b"BUNIT   = 'kpc kpc kpc'", b"AXES    = ''", b"NAXIS   =  999", b"PCOUNT  = 1e30"))
                data[card:card + 80] = text.ljust(80)
        else:
            a, b = sorted((place, draw.randrange(len(data))))
            data[a:b] = data[a:b][::-1] if b - a < 400 else data[a:b]
        if not data:
            data = bytearray(b" ")
    return bytes(data)


def main():
    draw = random.Random(SEED)
    codes = {}
    with tempfile.TemporaryDirectory() as folder:
        folder = pathlib.Path(folder)
        grid = folder / "grid.fits"
        make_grid.main(str(grid), 4, 6)
        grid_bytes = grid.read_bytes()
        starter = subprocess.run([PROGRAM, "scenario", "edge_on_disc"], capture_output=True, check=True).stdout
        use = folder / "use.toml"
        use.write_text('input.grid = "grid.fits"\nradio.frequencies = ["1 GHz"]\nradio.unit = "K"\nmap.pixel = "60 arcsec"\n'
                       'accuracy.estimate = false\nheights.models = ["exponential"]\n')
        scenario = folder / "scenario.toml"
        for turn in range(ROUNDS):
            grid.write_bytes(damaged(grid_bytes, draw))
            scenario.write_bytes(damaged(starter, draw))
            runs = [["inspect", grid], ["inspect", scenario], ["predict", scenario, "--dry-run"], ["heights", grid, "--distance", "10 Mpc"],
                    ["predict", use, "-o", folder / "out", "--force", "-q"]]
            for arguments in runs:
                done = subprocess.run([PROGRAM, *map(str, arguments)], capture_output=True, timeout=60)
                codes[done.returncode] = codes.get(done.returncode, 0) + 1
                if done.returncode not in (0, 1, 2, 3, 4, 5, 6):
                    kept = pathlib.Path(tempfile.gettempdir()) / f"aureole_fuzz_{SEED}_{turn}{pathlib.Path(arguments[1]).suffix}"
                    kept.write_bytes((grid if arguments[1] == use else pathlib.Path(arguments[1])).read_bytes())
                    print(f"exit {done.returncode} by {arguments[0]} in round {turn}, kept as {kept}\n{done.stderr[-500:]}")
                    return 1
                if done.returncode == 1 and b"fault of aureole" in done.stderr:
                    print(f"round {turn}: {arguments[0]}: {done.stderr.decode(errors='replace')[-500:]}")
                    return 1
    print(f"{ROUNDS} rounds, seed {SEED}, exit codes {dict(sorted(codes.items()))}")
    return 0 if len(codes) > 1 else 1


if __name__ == "__main__":
    sys.exit(main())
