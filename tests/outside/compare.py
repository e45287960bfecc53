#!/usr/bin/env python3
"""Compares the program with the exact oracle on random timetables.

    python3 compare.py FEWEST COUNT [SEED]

FEWEST is the program; COUNT timetables are made from SEED (1 if not given): pins, needs,
sizes, only, never, kinds, overridden members, kinds that grow as needed, openings (over
midnight too), closures, buffers, weights, a change of clock. Whatever the program calls
proved must be the oracle's answer; a floor must never be above it; the clique must agree.
Needs Python 3.11 and highspy. Exit code 1 at the first disagreement, whose file is kept.
"""

import argparse
import collections
import json
import random
import subprocess
import sys
import tempfile

import oracle


def timetable(rng):
    n = rng.choice([4, 8, 15, 30, 50])
    # Half of them have plenty of room, so that the count is what matters.
    roomy = rng.random() < .5
    odds = (lambda usual: rng.random() < usual * .4) if roomy else (lambda usual: rng.random() < usual)
    days = rng.choice([1, 1, 2])
    # The night before the last Sunday of March has a change of clock in Lisbon.
    month_day = rng.choice(["2027-01-11", "2027-03-27"])
    zone = rng.choice(["UTC", "Europe/Lisbon"])

    def moment(minute):
        day = int(month_day[-2:]) + minute // 1440
        return f"{month_day[:-2]}{day:02d}T{minute % 1440 // 60:02d}:{minute % 60:02d}:00"

    lines = ["[timetable]", 'title = "t"', f'zone = "{zone}"', 'noun = ["room", "rooms"]',
             f'turnaround = "{rng.choice([0, 0, 10, 30])}m"', f'setup = "{rng.choice([0, 0, 5])}m"']
    names, kinds = [], []
    if rng.random() < .9:
        for k in range(rng.randint(1 if roomy else 0, 3)):
            count = rng.choice([6, 8, "as needed"] if roomy else [1, 2, 3, 4, "as needed"])
            shown = f'"{count}"' if isinstance(count, str) else count
            lines += ["[[kind]]", f'id = "k{k}"', f"count = {shown}",
                      f"seats = {rng.choice([60, 90] if roomy else [20, 30, 60])}", "offers = " + rng.choice(["[]", "['p']"])]
            kinds.append(f"k{k}")
            names += [f"k{k}-{i}" for i in range(1, 1 + (3 if isinstance(count, str) else count))]
            if odds(.3):
                lines.append('open = [{ days = "mon-sun", from = "20:00", to = "12:00" }]')
            if odds(.4):
                lines += ["[[resource]]", f'id = "k{k}-1"', f'kind = "k{k}"',
                          rng.choice(["seats = 90", 'turnaround = "0m"', "offers = ['p', 'q']",
                                      'open = [{ from = "06:00", to = "22:00" }]'])]
        for r in range(rng.randint(0 if kinds else 1, 4)):
            lines += ["[[resource]]", f'id = "r{r}"']
            if odds(.7):
                lines.append(f"seats = {rng.choice([20, 40, 60, 90])}")
            if odds(.5):
                lines.append("offers = ['p']")
            if odds(.3):
                lines.append(f"kind = '{rng.choice(kinds + ['g'])}'")
            if odds(.3):
                lines.append('open = [{ from = "07:00", to = "19:00" }, { from = "19:00", to = "00:00" }]')
            if odds(.3):
                at = rng.randint(0, 20) * 60
                lines.append(f"closed = [{{ from = {moment(at)}, to = {moment(at + 90)} }}]")
            if odds(.3):
                lines.append(f'turnaround = "{rng.choice([0, 20])}m"')
            names.append(f"r{r}")
    else:
        names = ["room-1", "room-2", "room-9"]
    for i in range(n):
        start = rng.randint(0, days * 23 * 4) * 15
        if "03-27" in month_day and 1440 + 60 <= start < 1440 + 120:
            start += 60
        lines += ["[[request]]", f'id = "q{i}"', f"start = {moment(start)}",
                  f'length = "{rng.choice([30, 60, 90, 180, 300])}m"',
                  f"size = {rng.choice([10, 25, 35, 50])}", f"weight = {rng.randint(1, 3)}"]
        if odds(.15):
            lines.append(f'pin = "{rng.choice(names)}"')
        if odds(.2):
            lines.append("needs = ['p']")
        if odds(.1):
            lines.append(f'never = ["{rng.choice(names + kinds)}"]')
        if odds(.1):
            lines.append(f'only = ["{rng.choice(names + kinds)}", "{names[0]}"]')
        if odds(.1):
            lines.append(f'setup = "{rng.choice([0, 15])}m"')
        if odds(.05):
            lines.append("withdrawn = true")
    return "\n".join(lines).replace(f'"{names[0]}", "{names[0]}"', f'"{names[0]}"') + "\n"


def main():
    program, count = sys.argv[1], int(sys.argv[2])
    rng = random.Random(int(sys.argv[3]) if len(sys.argv) > 3 else 1)
    exact = argparse.Namespace(apart=False, seconds=60)
    seen = collections.Counter()
    for trial in range(count):
        with tempfile.NamedTemporaryFile("w", suffix=".toml", delete=False) as file:
            file.write(timetable(rng))
        done = subprocess.run([program, "count", "--json", "--seconds", "0.5", file.name],
                              capture_output=True, text=True)
        if done.returncode == 2:
            # Such as a gap, a name taken twice: the generator is blunt.
            seen["refused"] += 1
            continue
        says = json.loads(done.stdout)
        table = oracle.Timetable(file.name)
        lost, in_use, proved, *_ = oracle.fewest(table, exact)
        if not proved:
            seen["oracle gave up"] += 1
            continue
        wrong = [
            says["clique"] != table.clique() and "clique",
            says["unplaced_floor"] > lost and "floor of what is unplaced",
            says["unplaced_weight"] < lost and "less unplaced than possible",
            lost == 0 and says["floor"] > in_use and "floor",
            lost == 0 and says["state"] == "impossible" and "impossible",
            says["state"] == "proved" and (lost, in_use) != (0, says["in_use"]) and "proved",
            says["unplaced_weight"] == lost == 0 and says["in_use"] < in_use and "fewer than possible",
        ]
        if any(wrong):
            print("DISAGREES:", [w for w in wrong if w], file.name, says["state"], says["in_use"],
                  says["floor"], says["clique"], says["unplaced_weight"], "exact:", lost, in_use)
            sys.exit(1)
        seen[says["state"]] += 1
        if lost == 0:
            seen["optimum above the clique"] += in_use > table.clique()
            seen["found the optimum"] += says["in_use"] == in_use and says["unplaced_weight"] == 0
            seen["all placeable"] += 1
        else:
            seen["least unplaced found"] += says["unplaced_weight"] == lost
            seen["least unplaced proved"] += says["unplaced_floor"] == lost
            seen["not all placeable"] += 1
    print(count, "timetables:", dict(sorted(seen.items())))


if __name__ == "__main__":
    main()
