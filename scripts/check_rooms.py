#!/usr/bin/env python3
"""Checks that every #include goes from a room to itself or to a room before it, and that third-party headers stay in
the rooms that own them. Exit 1 with a line per offence."""
import pathlib
import re
import sys

ROOMS = ["base", "files", "scenario", "physics", "grid", "media", "spectra", "transport", "emission", "sight", "maps", "profiles",
         "report", "app"]
OWNERS = {
    "fitsio.h": {"files"},
    "toml++": {"scenario", "files"},
    "toml.hpp": {"scenario", "files"},
    "muParser": {"scenario"},
    "fftw3": {"maps"},
    "CLI": {"app"},
    "spdlog": {"app"},
    "Eigen": {"profiles", "emission", "transport"},
    "klu": {"transport"},
    "gsl": {"physics", "profiles", "transport"},
}


def main() -> int:
    top = pathlib.Path(__file__).resolve().parent.parent
    offences = []
    seen = 0
    for base in ("include/aureole", "src"):
        for path in sorted((top / base).rglob("*.[ch]pp")):
            room = path.relative_to(top / base).parts[0]
            if room not in ROOMS:
                if room == "main":
                    continue
                offences.append(f"{path.relative_to(top)}: in no room")
                continue
            for number, line in enumerate(path.read_text().splitlines(), 1):
                found = re.match(r'\s*#include\s*[<"]([^>"]+)[>"]', line)
                if not found:
                    continue
                seen += 1
                target = found.group(1)
                place = f"{path.relative_to(top)}:{number}"
                inner = re.match(r"aureole/(\w+)/", target)
                if inner and ROOMS.index(inner.group(1)) > ROOMS.index(room):
                    offences.append(f"{place}: {room} includes {inner.group(1)}, which comes after it")
                for name, owners in OWNERS.items():
                    if (target == name or target.startswith(name)) and not target.startswith("aureole") and room not in owners:
                        offences.append(f"{place}: <{target}> belongs to {', '.join(sorted(owners))}")
    for offence in offences:
        print(offence)
    print(f"{seen} includes checked, {len(offences)} offences")
    return 1 if offences or seen < 50 else 0


if __name__ == "__main__":
    sys.exit(main())
