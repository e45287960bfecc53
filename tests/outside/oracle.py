#!/usr/bin/env python3
"""An exact oracle for timetables, written from the file format alone.

    python3 oracle.py FILE.toml                fewest resources, by an exact model
    python3 oracle.py FILE.toml --to N         and the cheapest changes of time that reach N

Options: --without-pins, --drop-pin ID (repeatable), --keep-pin ID (repeatable: all other pins
go), --apart (one variable block per resource instead of one per class), --plan, --seconds S.
Needs Python 3.11 and highspy. Exit codes: 0 answered and proved, 2 bad input, 3 not proved.
"""

import argparse
import contextlib
import datetime as dt
import json
import os
import re
import sys
import tomllib
from collections import defaultdict
from dataclasses import dataclass, field
from zoneinfo import ZoneInfo

import highspy
import numpy as np

DAYS = ["mon", "tue", "wed", "thu", "fri", "sat", "sun"]
REFUSED = ["repeat", "also", "except", "together"]


class Bad(Exception):
    pass


# ---------------------------------------------------------------- time

def to_utc(value, zone, strict=True):
    """Civil time to whole seconds since 1970; a time that occurs twice takes the earlier."""
    if not isinstance(value, dt.datetime):
        raise Bad(f"not a date with a time: {value!r}")
    if value.tzinfo is not None:
        return int(value.timestamp())
    aware = value.replace(tzinfo=zone, fold=0)
    seconds = int(aware.timestamp())
    back = dt.datetime.fromtimestamp(seconds, zone).replace(tzinfo=None)
    if strict and back != value:
        raise Bad(f"{value} does not exist in {zone.key}")
    return seconds


def length(text):
    if not isinstance(text, str) or not re.fullmatch(r"(\d+[dhms])+", text):
        raise Bad(f"not a length: {text!r}")
    unit = {"d": 86400, "h": 3600, "m": 60, "s": 1}
    return sum(int(n) * unit[u] for n, u in re.findall(r"(\d+)([dhms])", text))


def day_set(text):
    if text is None:
        return set(range(7))
    found = set()
    for bit in text.split(","):
        ends = [DAYS.index(name.strip()[:3].lower()) for name in bit.split("-")]
        day = ends[0]
        found.add(day)
        while day != ends[-1]:
            day = (day + 1) % 7
            found.add(day)
    return found


def merge(spans):
    out = []
    for a, b in sorted(spans):
        if out and a <= out[-1][1]:
            out[-1] = (out[-1][0], max(b, out[-1][1]))
        elif b > a:
            out.append((a, b))
    return out


def opening_spans(rules, zone, first, last):
    """Spans in which a resource is open, adjoining ones joined; None when always open."""
    if rules is None:
        return None
    spans = []
    day = dt.datetime.fromtimestamp(first, zone).date() - dt.timedelta(days=2)
    end = dt.datetime.fromtimestamp(last, zone).date() + dt.timedelta(days=2)
    while day <= end:
        for rule in rules:
            if day.weekday() not in day_set(rule.get("days")):
                continue
            marks = []
            for key, default in (("from", "00:00"), ("to", "24:00")):
                value = rule.get(key, default)
                if isinstance(value, dt.time):
                    value = value.strftime("%H:%M:%S")
                bits = [int(b) for b in value.split(":")]
                marks.append(bits[0] * 3600 + bits[1] * 60 + (bits[2] if len(bits) > 2 else 0))
            if marks[1] <= marks[0]:
                marks[1] += 86400
            midnight = dt.datetime.combine(day, dt.time())
            a, b = (to_utc(midnight + dt.timedelta(seconds=m), zone, strict=False)
                    for m in marks)
            spans.append((a, b))
        day += dt.timedelta(days=1)
    return merge(spans)


# ---------------------------------------------------------------- what the file states

@dataclass
class Resource:
    id: str
    kind: str | None
    seats: int | None = None
    offers: frozenset = frozenset()
    setup: int | None = None
    turnaround: int | None = None
    open_rules: list | None = None
    open: list | None = None
    closed: tuple = ()
    number: int = 0

    def names(self):
        return {self.id} if self.kind is None else {self.id, self.kind}


@dataclass
class Piece:
    id: str
    start: int
    end: int
    size: int | None
    needs: frozenset
    only: list | None
    never: list
    people: list
    may_start: list | None
    weight: int
    pin: str | None
    fastened: bool
    setup: int | None
    turnaround: int | None
    uses: list = field(default_factory=list)


class Timetable:
    def __init__(self, path, pins=lambda piece: True):
        with open(path, "rb") as f:
            raw = tomllib.load(f)
        head = raw.get("timetable", {})
        if "title" not in head:
            raise Bad("no title")
        for table in ("part", "occurrence"):
            if table in raw:
                raise Bad(f"[[{table}]] is not handled here")
        self.zone = ZoneInfo(head.get("zone", "UTC"))
        self.grid = length(head.get("grid", "5m"))
        self.setup = length(head.get("setup", "0m"))
        self.turnaround = length(head.get("turnaround", "0m"))
        self.leeway = length(head.get("leeway", "0m"))
        self.fee = head.get("move_fee", 30)
        settled = head.get("settled_until")
        self.settled = to_utc(settled, self.zone) if settled else None
        self.pieces = self.read_pieces(raw.get("request", []), pins)
        times = [p.start for p in self.pieces] + [p.end for p in self.pieces] or [0]
        for p in self.pieces:
            for a, b in p.may_start or []:
                times += [a, b + p.end - p.start]
        reach = 2 * 86400 + self.leeway
        self.first, self.last = min(times) - reach, max(times) + reach
        self.resources = self.read_resources(raw, head)
        for r in self.resources:
            r.open = opening_spans(r.open_rules, self.zone, self.first, self.last)
        known = {r.id for r in self.resources}
        for p in self.pieces:
            if p.pin is not None and p.pin not in known:
                raise Bad(f"{p.id} is pinned on {p.pin}, which is no resource")
            p.uses = [r for r in self.resources if self.may_use(p, r, p.start)]

    def read_pieces(self, requests, pins):
        pieces, seen = [], set()
        for q in requests:
            for key in REFUSED:
                if key in q:
                    raise Bad(f"{q.get('id')}: {key} is not handled here")
            if q["id"] in seen:
                raise Bad(f"two requests called {q['id']}")
            seen.add(q["id"])
            if q.get("withdrawn"):
                continue
            start = to_utc(q["start"], self.zone)
            end = to_utc(q["end"], self.zone) if "end" in q else start + length(q["length"])
            if end <= start:
                raise Bad(f"{q['id']} ends before it starts")
            windows = q.get("may_start")
            if windows is not None:
                windows = [(to_utc(w["from"], self.zone), to_utc(w["to"], self.zone))
                           for w in windows]
            piece = Piece(
                q["id"], start, end, q.get("size"), frozenset(q.get("needs", [])),
                q.get("only"), q.get("never", []), q.get("people", []), windows,
                q.get("weight", 1), q.get("pin"), bool(q.get("fastened")),
                length(q["setup"]) if "setup" in q else None,
                length(q["turnaround"]) if "turnaround" in q else None)
            if piece.pin and not pins(piece):
                piece.pin = None
            pieces.append(piece)
        return pieces

    def read_resources(self, raw, head):
        kinds = raw.get("kind", [])
        stated = raw.get("resource", [])
        if not kinds and not stated:
            kinds = [{"id": head.get("noun", ["resource", "resources"])[0],
                      "count": "as needed"}]
        tables = {k["id"]: k for k in kinds}
        named = {r["id"]: r for r in stated}
        if len(named) != len(stated) or len(tables) != len(kinds):
            raise Bad("an id occurs twice")

        def make(id_, kind, own, number=0, member=True):
            # Only a member takes from its kind what it does not state.
            base = tables.get(kind, {}) if member else {}

            def get(key):
                return own[key] if key in own else base.get(key)

            closed = tuple((to_utc(c["from"], self.zone), to_utc(c["to"], self.zone))
                           for c in get("closed") or [])
            setup, turn = get("setup"), get("turnaround")
            return Resource(id_, kind, get("seats"), frozenset(get("offers") or []),
                            None if setup is None else length(setup),
                            None if turn is None else length(turn),
                            get("open"), None, closed, number)

        mentioned = set()
        for p in self.pieces:
            mentioned |= {p.pin, *(p.only or []), *p.never} - {None}
        out, done = [], set()
        for k in kinds:
            pattern = re.compile(re.escape(k["id"]) + r"-([1-9]\d*)")
            if k["count"] == "as needed":
                special = {n for n in mentioned if pattern.fullmatch(n) and
                           (n not in named or named[n].get("kind") == k["id"])}
                special |= {n for n, r in named.items()
                            if r.get("kind") == k["id"] and pattern.fullmatch(n)}
                sample = make(k["id"], k["id"], {})
                fresh = load(self.occupied(p, sample, p.start) for p in self.pieces)
                ids, n = sorted(special), 1
                while fresh > 0:
                    if f"{k['id']}-{n}" not in special:
                        ids.append(f"{k['id']}-{n}")
                        fresh -= 1
                    n += 1
                ids.sort(key=lambda s: int(s.rsplit("-", 1)[1]))
            else:
                ids = [f"{k['id']}-{n}" for n in range(1, k["count"] + 1)]
            for id_ in ids:
                own = named.get(id_, {})
                if own and own.get("kind") != k["id"]:
                    raise Bad(f"{id_} is a member of {k['id']} and a resource of its own")
                out.append(make(id_, k["id"], own))
                done.add(id_)
        for r in stated:
            if r["id"] not in done:
                out.append(make(r["id"], r.get("kind"), r, member=False))
        return out

    # ------------------------------------------------------------ meaning

    def buffers(self, p, r):
        def pick(*values):
            return next(v for v in values if v is not None)
        return (pick(p.setup, r.setup, self.setup),
                pick(p.turnaround, r.turnaround, self.turnaround))

    def occupied(self, p, r, start):
        before, after = self.buffers(p, r)
        return start - before, start + (p.end - p.start) + after

    def may_ever_use(self, p, r):
        """Everything but the hours."""
        if p.size is not None and r.seats is not None and p.size > r.seats:
            return False
        if not p.needs <= r.offers:
            return False
        if p.only is not None and not r.names() & set(p.only):
            return False
        if r.names() & set(p.never):
            return False
        return p.pin is None or p.pin == r.id

    def open_for(self, p, r, start):
        a, b = self.occupied(p, r, start)
        if r.open is not None and not any(x <= a and b <= y for x, y in r.open):
            return False
        return not any(x < b and a < y for x, y in r.closed)

    def may_use(self, p, r, start):
        return self.may_ever_use(p, r) and self.open_for(p, r, start)

    def least_span(self, p):
        if p.uses:
            pairs = [self.buffers(p, r) for r in p.uses]
        else:
            pairs = [(self.setup if p.setup is None else p.setup,
                      self.turnaround if p.turnaround is None else p.turnaround)]
        return p.start - min(b for b, _ in pairs), p.end + min(a for _, a in pairs)

    def clique(self):
        return load(self.least_span(p) for p in self.pieces)

    def starts(self, p):
        """The present start first, then every other start the piece may take."""
        begun = self.settled is not None and p.start < self.settled
        windows = p.may_start
        if windows is None and self.leeway:
            windows = [(p.start - self.leeway, p.start + self.leeway)]
        found = {p.start}
        if windows is not None and not p.fastened and not begun:
            for a, b in windows:
                s = p.start + -((p.start - a) // self.grid) * self.grid
                while s <= b:
                    found.add(s)
                    s += self.grid
        return sorted(found, key=lambda s: (abs(s - p.start), s))


def load(spans):
    marks = []
    for a, b in spans:
        marks += [(a, 1), (b, -1)]
    now = most = 0
    for _, step in sorted(marks):
        now += step
        most = max(most, now)
    return most


def maximal_sets(spans):
    """Maximal sets of pairwise overlapping spans; spans is a list of (from, to, key)."""
    marks = sorted([(b, 0, k) for _, b, k in spans] + [(a, 1, k) for a, _, k in spans])
    live, grew, out = {}, False, []
    for _, what, key in marks:
        if what:
            live[key] = live.get(key, 0) + 1
            grew = True
        else:
            if grew:
                out.append(list(live))
                grew = False
            live[key] -= 1
            if not live[key]:
                del live[key]
    return out


# ---------------------------------------------------------------- the model

@contextlib.contextmanager
def quiet():
    """The solver greets on standard output; that belongs to the answer alone."""
    sys.stdout.flush()
    kept, null = os.dup(1), os.open(os.devnull, os.O_WRONLY)
    os.dup2(null, 1)
    try:
        yield
    finally:
        os.dup2(kept, 1)
        os.close(kept)
        os.close(null)


class Model:
    """A thin sparse builder over HiGHS: all columns integer."""

    def __init__(self, seconds):
        self.cost, self.low, self.high, self.rows = [], [], [], []
        self.seconds = seconds

    def column(self, low=0, high=1):
        self.low.append(low)
        self.high.append(high)
        return len(self.low) - 1

    def row(self, low, high, terms):
        self.rows.append((low, high, terms))

    def solve(self, cost):
        """Minimise: (value, columns, proved); value None when impossible."""
        n = len(self.low)
        lp = highspy.HighsLp()
        lp.num_col_, lp.num_row_ = n, len(self.rows)
        costs = np.zeros(n)
        for col, c in cost.items():
            costs[col] = c
        lp.col_cost_ = costs
        lp.col_lower_, lp.col_upper_ = np.array(self.low, float), np.array(self.high, float)
        lp.row_lower_ = np.array([r[0] for r in self.rows], float)
        lp.row_upper_ = np.array([r[1] for r in self.rows], float)
        index, value, start = [], [], [0]
        for _, _, terms in self.rows:
            for col, v in terms:
                index.append(col)
                value.append(v)
            start.append(len(index))
        lp.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
        lp.a_matrix_.start_ = np.array(start, np.int32)
        lp.a_matrix_.index_ = np.array(index, np.int32)
        lp.a_matrix_.value_ = np.array(value, float)
        lp.integrality_ = [highspy.HighsVarType.kInteger] * n
        with quiet():
            h = highspy.Highs()
            h.setOptionValue("output_flag", False)
        h.setOptionValue("threads", 1)
        h.setOptionValue("mip_rel_gap", 0.0)
        h.setOptionValue("mip_abs_gap", 0.5)
        h.setOptionValue("time_limit", float(self.seconds))
        with quiet():
            h.passModel(lp)
            h.run()
        status = h.getModelStatus()
        if status == highspy.HighsModelStatus.kInfeasible:
            return None, None, True
        got = h.getSolution().col_value
        if status != highspy.HighsModelStatus.kOptimal and not h.getSolution().value_valid:
            return None, None, False
        cols = [round(v) for v in got]
        for low, high, terms in self.rows:
            total = sum(cols[c] * v for c, v in terms)
            assert low - 1e-6 <= total <= high + 1e-6, "a row is broken after rounding"
        total = sum(c * cols[i] for i, c in cost.items())
        return round(total), cols, status == highspy.HighsModelStatus.kOptimal


def group(resources, key, apart):
    groups = defaultdict(list)
    for r in resources:
        groups[(r.id,) if apart else key(r)].append(r)
    return list(groups.values())


def give_names(table, groups, chosen):
    """Class by class, earliest first on the first free member: always enough members."""
    plan = {}
    for g, members in enumerate(groups):
        free = {r.id: None for r in members}
        for a, b, p in sorted((*table.occupied(p, members[0], s), p.id)
                              for p, s, where in chosen if where == g):
            name = next(n for n in free if free[n] is None or free[n] <= a)
            free[name] = b
            plan[p] = name
    return plan


def fewest(table, args):
    def key(r):
        return frozenset((p.id, table.occupied(p, r, p.start))
                         for p in table.pieces if r in p.uses)
    for p in table.pieces:
        ids = {r.id for r in p.uses}
        p.use_ids = ids
    groups = group(table.resources, key, args.apart)
    m = Model(args.seconds)
    y = [m.column(0, len(members)) for members in groups]
    x, out = {}, {}
    for p in table.pieces:
        terms = []
        for g, members in enumerate(groups):
            if members[0].id in p.use_ids:
                x[p.id, g] = m.column()
                terms.append((x[p.id, g], 1))
        out[p.id] = m.column()
        m.row(1, 1, terms + [(out[p.id], 1)])
    for g, members in enumerate(groups):
        spans = [(*table.occupied(p, members[0], p.start), x[p.id, g])
                 for p in table.pieces if (p.id, g) in x]
        for cols in maximal_sets(spans):
            m.row(-1e9, 0, [(c, 1) for c in cols] + [(y[g], -1)])
    weights = {out[p.id]: p.weight for p in table.pieces}
    lost, _, sure1 = m.solve(weights)
    m.row(-1e9, lost, list(weights.items()))
    count, cols, sure2 = m.solve({c: 1 for c in y})
    chosen = [(p, p.start, g) for p in table.pieces for g in range(len(groups))
              if (p.id, g) in x and cols[x[p.id, g]]]
    unplaced = [p.id for p in table.pieces if cols[out[p.id]]]
    return lost, count, sure1 and sure2, give_names(table, groups, chosen), unplaced


def ease(table, n, args):
    """Place everything on at most n resources: least weight * fee + minutes shifted."""
    def key(r):
        return (frozenset(p.id for p in table.pieces if table.may_ever_use(p, r)),
                tuple(table.buffers(p, r) for p in table.pieces),
                None if r.open is None else tuple(r.open), r.closed)
    groups = group(table.resources, key, args.apart)
    m = Model(args.seconds)
    y = [m.column(0, min(n, len(members))) for members in groups]
    m.row(-1e9, n, [(c, 1) for c in y])
    cost, at, spans = {}, [], [[] for _ in groups]
    raw = defaultdict(list)
    for p in table.pieces:
        one = []
        for s in table.starts(p):
            here = []
            for g, members in enumerate(groups):
                if table.may_use(p, members[0], s):
                    c = m.column()
                    here.append((c, 1))
                    at.append((p, s, g, c))
                    spans[g].append((*table.occupied(p, members[0], s), c))
                    if s != p.start:
                        cost[c] = p.weight * table.fee + abs(s - p.start) / 60
                    raw[p.id].append((s, s + p.end - p.start, c))
            one += here
        if not one:
            return {"ease_state": "impossible", "ease_cost": None, "because": p.id}
        m.row(1, 1, one)
    for g in range(len(groups)):
        for cols in maximal_sets(spans[g]):
            m.row(-1e9, 0, [(c, 1) for c in cols] + [(y[g], -1)])
    by_person = defaultdict(list)
    for p in table.pieces:
        for person in set(p.people):
            by_person[person].append(p)
    seen = set()

    def apart(pieces):
        key = tuple(sorted(p.id for p in pieces))
        if key in seen:
            return
        seen.add(key)
        for cols in maximal_sets([t for p in pieces for t in raw[p.id]]):
            m.row(-1e9, 1, [(c, 1) for c in cols])

    for person, pieces in by_person.items():
        pairs = [(p, q) for i, p in enumerate(pieces) for q in pieces[i + 1:]]
        fine = [pq for pq in pairs if not (pq[0].start < pq[1].end and pq[1].start < pq[0].end)]
        if len(fine) == len(pairs) > 0:
            apart(pieces)
        else:
            for pq in fine:
                apart(pq)
    value, cols, sure = m.solve(cost)
    if value is None:
        return {"ease_state": "impossible" if sure else "open", "ease_cost": None}
    chosen = [(p, s, g) for p, s, g, c in at if cols[c]]
    moves = [(p, s) for p, s, _ in chosen if s != p.start]
    found = {"ease_state": "proved" if sure else "open", "ease_cost": value,
             "moved": len(moves),
             "edits": [f"move {p.id} to "
                       f"{dt.datetime.fromtimestamp(s, table.zone):%Y-%m-%d %H:%M}"
                       for p, s in moves]}
    plan = give_names(table, groups, chosen)
    found["keeps"] = sorted(set(plan.values()))
    recheck(table, plan, {p.id: s for p, s, _ in chosen})
    return found


def recheck(table, plan, starts):
    """Straight from the meaning: nothing that the model took for granted."""
    by_id = {r.id: r for r in table.resources}
    taken = defaultdict(list)
    for p in table.pieces:
        if p.id in plan:
            r = by_id[plan[p.id]]
            assert table.may_use(p, r, starts[p.id]), (p.id, r.id)
            taken[r.id].append(table.occupied(p, r, starts[p.id]))
    for r, spans in taken.items():
        assert load(spans) == 1, r


def clashes(table):
    out = []
    for i, p in enumerate(table.pieces):
        for q in table.pieces[i + 1:]:
            if p.start < q.end and q.start < p.end:
                out += [(who, p.id, q.id) for who in sorted(set(p.people) & set(q.people))]
    return out


def main():
    ap = argparse.ArgumentParser()
    ap.add_argument("file")
    ap.add_argument("--to", type=int)
    ap.add_argument("--without-pins", action="store_true")
    ap.add_argument("--drop-pin", action="append", default=[])
    ap.add_argument("--keep-pin", action="append", default=[])
    ap.add_argument("--apart", action="store_true")
    ap.add_argument("--plan", action="store_true")
    ap.add_argument("--seconds", type=float, default=600)
    args = ap.parse_args()

    def pins(piece):
        if args.without_pins or piece.id in args.drop_pin:
            return False
        return not args.keep_pin or piece.id in args.keep_pin

    try:
        table = Timetable(args.file, pins)
    except (Bad, KeyError, ValueError, OSError) as why:
        print(f"{args.file}: {why}", file=sys.stderr)
        return 2
    lost, count, proved, plan, unplaced = fewest(table, args)
    recheck(table, plan, {p.id: p.start for p in table.pieces})
    assert len(set(plan.values())) <= count and len(plan) + len(unplaced) == len(table.pieces)
    found = {"clique": table.clique(), "unplaced_weight": lost, "in_use": count,
             "proved": proved}
    if args.plan:
        found |= {"pieces": len(table.pieces), "resources": len(table.resources),
                  "clashes": clashes(table), "unplaced": unplaced, "placements": plan}
    if args.to is not None:
        eased = ease(table, args.to, args)
        proved = proved and eased["ease_state"] in ("proved", "impossible")
        found |= eased
    print(json.dumps(found))
    return 0 if proved else 3


if __name__ == "__main__":
    sys.exit(main())
