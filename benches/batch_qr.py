"""Times the basis against batch QR on the shapes of ``cases.csv``; ``--check`` runs each once, small and untimed."""

import argparse
import csv
from pathlib import Path

from perpend import bench

CASES = Path(__file__).with_name("cases.csv")


def cases():
    with CASES.open(newline="", encoding="utf-8") as file:
        return [(int(line["dim"]), int(line["rank"])) for line in csv.DictReader(file)]


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--check", action="store_true", help="assert every answer on small cases, time nothing")
    arguments = parser.parse_args()
    for line in bench.conditions():
        print(line)
    for line in bench.lines(bench.compare(cases(), check=arguments.check)):
        print(line, flush=True)


if __name__ == "__main__":
    main()
