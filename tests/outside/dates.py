"""Requests that repeat, dates that stay together, and fewest changes, compared with an exact oracle.

The dates come from python-dateutil, the clock from zoneinfo, the optimum from an integer programme solved by HiGHS;
the oracle was written from the file format alone.

    pip install highspy python-dateutil
    python3 tests/outside/dates.py target/release/fewest 300 1

First COUNT random timetables are counted, then as many are planned, edited and counted again. Every placement is
checked, then the least weight that stays out, the fewest resources, the fewest relocations, and every floor.
"""

import datetime as D
import itertools
import json
import os
import random
import re
import subprocess
import sys
import tempfile
import tomllib
from zoneinfo import ZoneInfo
from dateutil.rrule import rrulestr
import highspy

UTC = D.timezone.utc


def run(*args, inp=None):
    """Exit code, output and errors of the program."""
    done = subprocess.run([PROGRAM, *args], input=inp, capture_output=True, text=True, timeout=60)
    return done.returncode, done.stdout, done.stderr


def q(s):
    return json.dumps(s)


def val(v):
    if isinstance(v, bool):
        return "true" if v else "false"
    if isinstance(v, (int,)):
        return str(v)
    if isinstance(v, (D.datetime,)):
        return v.isoformat()
    if isinstance(v, D.date):
        return v.isoformat()
    if isinstance(v, str):
        return q(v)
    if isinstance(v, list):
        return "[" + ", ".join(val(x) for x in v) + "]"
    if isinstance(v, dict):
        return "{ " + ", ".join(k + " = " + val(x) for k, x in v.items()) + " }"
    raise Exception(v)


def emit(doc):
    out = ["# top comment", "[timetable]"]
    for k, v in doc["timetable"].items():
        out.append(f"{k} = {val(v)}")
    for t in ("kind", "resource", "request", "occurrence"):
        for e in doc.get(t, []):
            out.append("")
            out.append(f"[[{t}]]")
            for k, v in e.items():
                out.append(f"{k} = {val(v)}")
    return "\n".join(out) + "\n"


def dur(s):
    m = re.findall(r"(\d+)([smhd])", s)
    return sum(int(n) * {"s": 1, "m": 60, "h": 3600, "d": 86400}[u] for n, u in m)


DAYS = ["mon", "tue", "wed", "thu", "fri", "sat", "sun"]


def dayset(s):
    r = set()
    for p in s.replace(" ", "").split(","):
        if "-" in p:
            a, b = p.split("-")
            i = DAYS.index(a)
            while True:
                r.add(i % 7)
                if DAYS[i % 7] == b:
                    break
                i += 1
        else:
            r.add(DAYS.index(p))
    return r


def ts(dt, z):
    return int(dt.replace(tzinfo=z).timestamp())


def resources(doc, npieces):
    """list of dict: id, kind, attrs"""
    tt = doc["timetable"]
    kinds = {k["id"]: k for k in doc.get("kind", [])}
    res = []
    ov = {r["id"]: r for r in doc.get("resource", [])}
    named = set()
    for k in doc.get("kind", []):
        n = k["count"]
        if n == "as needed":
            n = max(npieces, 3) + 1
        for i in range(1, n + 1):
            d = dict(k)
            d.pop("count")
            d["kind"] = k["id"]
            d["id"] = f"{k['id']}-{i}"
            d["pool"] = k["count"] == "as needed"
            if d["id"] in ov:
                d.update(ov[d["id"]])
                named.add(d["id"])
            res.append(d)
    for r in doc.get("resource", []):
        if r["id"] in named:
            continue
        res.append(dict(r))
    if not doc.get("kind") and not doc.get("resource"):
        noun = tt.get("noun", ["room", "rooms"])[0] if "noun" in tt else "resource"
        for i in range(1, max(npieces, 3) + 2):
            res.append({"id": f"{noun}-{i}", "pool": True})
    return res


def expand(doc):
    z = ZoneInfo(doc["timetable"].get("zone", "UTC"))
    P = []
    occ = {}
    for o in doc.get("occurrence", []):
        occ[(o["of"], o["date"])] = o
    for r in doc["request"]:
        if r.get("withdrawn"):
            continue
        ln = dur(r["length"]) if "length" in r else ts(r["end"], z) - ts(r["start"], z)
        if "repeat" in r or "also" in r:
            if "repeat" in r:
                rule = r["repeat"]
                m = re.search(r"UNTIL=(\d{8}T\d{6})Z", rule)
                if m:
                    u = (
                        D.datetime.strptime(m[1], "%Y%m%dT%H%M%S")
                        .replace(tzinfo=UTC)
                        .astimezone(z)
                        .replace(tzinfo=None)
                    )
                    rule = rule.replace(m[0], "UNTIL=" + u.strftime("%Y%m%dT%H%M%S"))
                starts = set(rrulestr(rule, dtstart=r["start"]))
            else:
                starts = {r["start"]}
            starts |= set(r.get("also", []))
            ex = set(r.get("except", []))
            starts = sorted(s for s in starts if s.date() not in ex and s not in ex)
            by = {}
            for s in starts:
                by.setdefault(s.date(), []).append(s)
            for s in starts:
                n = f"{r['id']}@{s.date()}"
                if len(by[s.date()]) > 1:
                    n += s.strftime("T%H%M")
                o = occ.get((r["id"], s.date())) if len(by[s.date()]) == 1 else occ.get((r["id"], s))
                o = o or {}
                if o.get("withdrawn"):
                    continue
                st = o.get("start", s)
                l = dur(o["length"]) if "length" in o else ln
                P.append(dict(name=n, req=r, s=ts(st, z), e=ts(st, z) + l, pin=o.get("pin", r.get("pin")), local=st))
        else:
            P.append(
                dict(
                    name=r["id"],
                    req=r,
                    s=ts(r["start"], z),
                    e=ts(r["start"], z) + ln,
                    pin=r.get("pin"),
                    local=r["start"],
                )
            )
    return P, z


def buf(p, R, tt, k):
    for d in (p["req"], R, tt):
        if k in d:
            return dur(d[k])
    return 0


def occupied(p, R, tt):
    return p["s"] - buf(p, R, tt, "setup"), p["e"] + buf(p, R, tt, "turnaround")


def windows(R, z, lo, hi):
    if "open" not in R:
        return None
    w = []
    d = D.datetime.fromtimestamp(lo, z).date() - D.timedelta(days=2)
    end = D.datetime.fromtimestamp(hi, z).date() + D.timedelta(days=2)
    while d <= end:
        for o in R["open"]:
            if d.weekday() in dayset(o["days"]):
                f = D.datetime.combine(d, D.time.fromisoformat(o["from"]))
                tt = o["to"]
                t = (
                    D.datetime.combine(d + D.timedelta(days=1), D.time())
                    if tt == "24:00"
                    else D.datetime.combine(d, D.time.fromisoformat(tt))
                )
                if t <= f:
                    t += D.timedelta(days=1)
                w.append((ts(f, z), ts(t, z)))
        d += D.timedelta(days=1)
    w.sort()
    m = []
    for a, b in w:
        if m and a <= m[-1][1]:
            m[-1] = (m[-1][0], max(b, m[-1][1]))
        else:
            m.append((a, b))
    return m


def allowed(p, R, doc, z):
    r = p["req"]
    tt = doc["timetable"]
    if p["pin"] and p["pin"] != R["id"]:
        return False
    if "seats" in R and r.get("size", 0) > R["seats"]:
        return False
    if not set(r.get("needs", [])) <= set(R.get("offers", [])):
        return False
    names = {R["id"], R.get("kind")}
    if "only" in r and not names & set(r["only"]):
        return False
    if names & set(r.get("never", [])):
        return False
    a, b = occupied(p, R, tt)
    w = windows(R, z, a, b)
    if w is not None and not any(x <= a and b <= y for x, y in w):
        return False
    for c in R.get("closed", []):
        if ts(c["from"], z) < b and a < ts(c["to"], z):
            return False
    return True


def model(doc, keep=None, unpin=()):
    P, z = expand(doc)
    if keep is not None:
        P = [p for p in P if p["name"] in keep]
    for p in P:
        if p["name"] in unpin or p["req"]["id"] in unpin:
            p["pin"] = None
    Rs = resources(doc, len(P))
    tt = doc["timetable"]
    units = []
    g = {}
    for i, p in enumerate(P):
        if p["req"].get("together"):
            g.setdefault(p["req"]["id"], []).append(i)
        else:
            units.append([i])
    units += list(g.values())
    occ = {(i, j): occupied(p, R, tt) for i, p in enumerate(P) for j, R in enumerate(Rs)}
    conf = lambda i, k, j: occ[i, j][0] < occ[k, j][1] and occ[k, j][0] < occ[i, j][1]
    ok = {}
    for u, U in enumerate(units):
        for j, R in enumerate(Rs):
            ok[u, j] = all(allowed(P[i], R, doc, z) for i in U) and not any(
                conf(a, b, j) for a, b in itertools.combinations(U, 2)
            )
    return P, z, Rs, units, conf, ok


def solve(doc, order=("unplaced", "count", "reloc"), old=None, only=None, full=False, keep=None, unpin=()):
    """returns dict aim->value lexicographically; None if full infeasible"""
    P, z, Rs, units, conf, ok = model(doc, keep, unpin)
    if only is not None:
        sel = [u for u, U in enumerate(units) if any(P[i]["name"] in only for i in U)]
    else:
        sel = list(range(len(units)))
    h = highspy.Highs()
    h.setOptionValue("output_flag", False)
    h.setOptionValue("mip_rel_gap", 0.0)
    h.setOptionValue("threads", 1)
    nv = 0
    lower = []
    cols = {}
    x = {}

    def addv():
        nonlocal nv
        h.addVar(0, 1)
        h.changeColIntegrality(nv, highspy.HighsVarType.kInteger)
        nv += 1
        return nv - 1

    def addr(lo, hi, t):
        h.addRow(lo, hi, len(t), [a for a, _ in t], [float(b) for _, b in t])

    for u in sel:
        for j in range(len(Rs)):
            if ok[u, j]:
                x[u, j] = addv()
    y = [addv() for _ in Rs]
    un = {u: addv() for u in sel}
    for u in sel:
        addr(1, 1, [(x[u, j], 1) for j in range(len(Rs)) if (u, j) in x] + [(un[u], 1)])
    members = lambda u: [i for i in units[u] if only is None or P[i]["name"] in only]
    for (u, j), v in x.items():
        addr(-1, 0, [(v, 1), (y[j], -1)])
    for j in range(len(Rs)):
        us = [u for u in sel if (u, j) in x]
        for a, b in itertools.combinations(us, 2):
            if any(conf(i, k, j) for i in members(a) for k in members(b)):
                addr(0, 1, [(x[a, j], 1), (x[b, j], 1)])
    pool = [j for j, R in enumerate(Rs) if R.get("pool")]
    aims = {}
    aims["unplaced"] = [(un[u], sum(P[i]["req"].get("weight", 1) for i in units[u])) for u in sel]
    aims["count"] = [(v, 1) for v in y]
    rel = []
    if old:
        for (u, j), v in x.items():
            c = sum(1 for i in units[u] if P[i]["name"] in old and old[P[i]["name"]] != Rs[j]["id"])
            if c:
                rel.append((v, c))
    aims["reloc"] = rel
    out = {}
    if full:
        for u in sel:
            h.changeColBounds(un[u], 0, 0)
    for a in order:
        if not aims[a]:
            out[a] = 0
            continue
        for c in range(nv):
            h.changeColCost(c, 0.0)
        for c, w in aims[a]:
            h.changeColCost(c, float(w))
        h.run()
        if h.getModelStatus() != highspy.HighsModelStatus.kOptimal:
            return None
        out[a] = round(h.getInfo().objective_function_value)
        addr(0, out[a] + 0.0, aims[a])
    return out


def checkplan(doc, j):
    """returns list of errors"""
    P, z, Rs, units, conf, ok = model(doc)
    E = []
    byid = {R["id"]: n for n, R in enumerate(Rs)}
    pl = j["placements"]
    un = [u["piece"] for u in j["unplaced"]]
    names = [p["name"] for p in P]
    if sorted(list(pl) + un) != sorted(names):
        E.append(("names", sorted(set(names) - set(pl) - set(un)), sorted((set(pl) | set(un)) - set(names))))
        return E
    if j["pieces"] != len(P):
        E.append(("pieces", j["pieces"], len(P)))
    for U_i, U in enumerate(units):
        rs = {pl.get(P[i]["name"]) for i in U}
        if len(rs) > 1:
            E.append(("split", [P[i]["name"] for i in U], rs))
            continue
        r = rs.pop()
        if r is None:
            continue
        if r not in byid:
            E.append(("no such resource", r))
            continue
        if not ok[U_i, byid[r]]:
            E.append(("not allowed", [P[i]["name"] for i in U], r))
    for a, b in itertools.combinations(range(len(P)), 2):
        ra = pl.get(P[a]["name"])
        if ra and ra == pl.get(P[b]["name"]) and ra in byid and conf(a, b, byid[ra]):
            E.append(("clash", P[a]["name"], P[b]["name"], ra))
    if j["in_use"] != len(set(pl.values())):
        E.append(("in_use", j["in_use"], len(set(pl.values()))))
    w = sum(p["req"].get("weight", 1) for p in P if p["name"] in un)
    if w != j["unplaced_weight"]:
        E.append(("unplaced_weight", w, j["unplaced_weight"]))
    return E


# ---------- generator
def gen(rng, prefer=False, easy=False):
    zone, base = rng.choice(
        [
            ("Europe/Lisbon", D.date(2027, 3, 25)),
            ("Europe/Lisbon", D.date(2027, 10, 28)),
            ("America/New_York", D.date(2027, 3, 11)),
            ("America/New_York", D.date(2027, 11, 4)),
            ("UTC", D.date(2028, 2, 25)),
        ]
    )
    tt = {"title": "T", "zone": zone}
    if rng.random() < 0.3:
        tt["noun"] = ["room", "rooms"]
    if rng.random() < 0.4:
        tt["setup"] = rng.choice(["5m", "10m", "1h"])
    if rng.random() < 0.5:
        tt["turnaround"] = rng.choice(["5m", "15m", "1h"])
    if prefer:
        tt["prefer"] = "changes"
    doc = {"timetable": tt, "kind": [], "resource": [], "request": [], "occurrence": []}
    mode = rng.random()
    OFF = ["p", "s"]

    def attrs(d):
        if rng.random() < 0.4:
            d["seats"] = rng.choice([10, 20, 30])
        if rng.random() < 0.5:
            d["offers"] = rng.sample(OFF, rng.randint(1, 2))
        if rng.random() < 0.25:
            d["setup"] = rng.choice(["0m", "20m"])
        if rng.random() < 0.25:
            d["turnaround"] = rng.choice(["0m", "30m"])
        if rng.random() < 0.25:
            d["open"] = [
                {
                    "days": rng.choice(["mon-fri", "mon-sun", "sat-tue", "mon,wed,fri"]),
                    "from": rng.choice(["07:00", "08:00"]),
                    "to": rng.choice(["12:00", "18:00", "20:00"]),
                }
            ] + (
                [{"days": "mon-sun", "from": rng.choice(["12:00", "20:00"]), "to": "02:00"}]
                if rng.random() < 0.3
                else []
            )
        if rng.random() < 0.25:
            f = D.datetime.combine(base + D.timedelta(days=rng.randint(0, 6)), D.time(rng.randint(8, 14)))
            d["closed"] = [{"from": f, "to": f + D.timedelta(hours=rng.choice([1, 3, 24])), "because": "r"}]
        return d

    if mode > 0.12:
        if rng.random() < 0.5:
            for k in range(rng.randint(1, 2)):
                doc["kind"].append(
                    attrs(
                        {"id": f"k{k}", "count": rng.choice([1, 2, 2, 3, "as needed"] if mode > 0.9 else [1, 2, 2, 3])}
                    )
                )
            if rng.random() < 0.3:
                (
                    doc["resource"].append({"id": "k0-1", "kind": "k0", "seats": rng.choice([5, 20, 50])})
                    if doc["kind"][0]["count"] != "as needed"
                    else 0
                )
        for k in range(rng.randint(1, 3)):
            d = attrs({"id": f"r{k}"})
            if rng.random() < 0.3:
                d["kind"] = "grp"
            doc["resource"].append(d)
    ids = [R["id"] for R in resources(doc, 0)]
    groups = [k["id"] for k in doc["kind"]] + (["grp"] if any(r.get("kind") == "grp" for r in doc["resource"]) else [])
    hr = lambda: D.time(rng.choice([8, 9, 9, 10, 10, 11, 12, 13]), rng.choice([0, 0, 15, 30]))
    for k in range(rng.randint(2, 7)):
        d = base + D.timedelta(days=rng.randint(0, 2))
        st = D.datetime.combine(d, hr())
        r = {"id": f"q{k}", "start": st}
        if rng.random() < 0.5:
            r["length"] = rng.choice(["30m", "1h", "1h30m", "2h", "45m"])
        else:
            r["end"] = st + D.timedelta(minutes=rng.choice([30, 60, 90, 150]))
        if rng.random() < 0.3:
            r["size"] = rng.choice([5, 15, 25])
        if rng.random() < 0.25:
            r["needs"] = [rng.choice(OFF)]
        if ids and rng.random() < 0.2:
            r["only"] = rng.sample(ids + groups, min(2, len(ids)))
        if ids and rng.random() < 0.15:
            r["never"] = [rng.choice(ids + groups)]
        if rng.random() < 0.4:
            r["weight"] = rng.randint(1, 4)
        if rng.random() < 0.1:
            r["setup"] = rng.choice(["0m", "30m"])
        if rng.random() < 0.1:
            r["turnaround"] = rng.choice(["0m", "45m"])
        if rng.random() < 0.18:
            r["pin"] = rng.choice(ids)
        if rng.random() < 0.1:
            r["fastened"] = True
        if rng.random() < 0.06:
            r["withdrawn"] = True
        rep = rng.random() < 0.65
        if rep:
            f = rng.choice(["DAILY", "DAILY", "WEEKLY", "WEEKLY", "MONTHLY"])
            rule = f"FREQ={f}"
            if rng.random() < 0.4:
                rule += f";INTERVAL={rng.randint(1,3)}"
            if f == "WEEKLY" and rng.random() < 0.6:
                ds = ["MO", "TU", "WE", "TH", "FR", "SA", "SU"]
                s = set(rng.sample(ds, 2))
                s.add(ds[d.weekday()])
                rule += ";BYDAY=" + ",".join(x for x in ds if x in s)
            if f == "MONTHLY" and rng.random() < 0.5:
                ds = ["MO", "TU", "WE", "TH", "FR", "SA", "SU"]
                n = (d.day - 1) // 7 + 1
                rule += f";BYDAY={n}{ds[d.weekday()]}"
            if rng.random() < 0.6:
                rule += f";COUNT={rng.randint(1,6)}"
            else:
                u = d + D.timedelta(days=rng.randint(1, 8) * (1 if f == "DAILY" else 4))
                rule += ";UNTIL=" + u.strftime("%Y%m%d") + rng.choice(["T235959Z", "T235959Z", "T120000Z"])
            r["repeat"] = rule
        if rep and rng.random() < 0.3 or rng.random() < 0.1:
            r["also"] = [
                D.datetime.combine(d + D.timedelta(days=rng.randint(0, 9)), hr()) for _ in range(rng.randint(1, 2))
            ]
            r["also"] = list(dict.fromkeys(r["also"]))
        if ("repeat" in r) and rng.random() < 0.3:
            r["except"] = [d + D.timedelta(days=rng.randint(1, 8))]
        if ("repeat" in r or "also" in r) and rng.random() < 0.5:
            r["together"] = True
        doc["request"].append(r)
        if "repeat" in r or "also" in r:
            tmp = {**r}
            tmp.pop("withdrawn", None)
            pp, _ = expand({"timetable": tt, "request": [tmp]})
            if rng.random() < 0.4 and pp:
                for p in rng.sample(pp, min(len(pp), rng.randint(1, 2))):
                    m = "T" in p["name"]
                    o = {"of": r["id"], "date": p["local"] if m else p["local"].date()}
                    if rng.random() < 0.5:
                        o["start"] = p["local"] + D.timedelta(minutes=rng.choice([-30, 30, 60, 1440]))
                    if rng.random() < 0.3:
                        o["length"] = rng.choice(["30m", "2h"])
                    if ids and rng.random() < 0.3:
                        o["pin"] = rng.choice(ids)
                    if rng.random() < 0.2:
                        o["fastened"] = True
                    if rng.random() < 0.2:
                        o["withdrawn"] = True
                    doc["occurrence"].append(o)
    doc = {k: v for k, v in doc.items() if v}
    return doc


def soften(doc, rng):
    for r in doc["request"]:
        for k in ("needs", "only", "never", "size"):
            if rng.random() < 0.6:
                r.pop(k, None)
    for r in doc.get("resource", []) + doc.get("kind", []):
        for k in ("open", "closed"):
            if rng.random() < 0.5:
                r.pop(k, None)
    for k in doc.get("kind", []):
        if k["count"] != "as needed":
            k["count"] += 1


def edit(doc, rng):
    ids = [R["id"] for R in resources(doc, 0)]
    for _ in range(rng.randint(1, 3)):
        r = rng.choice(doc["request"])
        c = rng.choice(
            [
                "pin",
                "pin",
                "unpin",
                "move",
                "withdraw",
                "size",
                "close",
                "newreq",
                "occ",
                "weight",
                "needs",
                "tog",
                "len",
                "zero",
                "seats",
                "drop",
            ]
        )
        if c == "pin" and ids:
            r["pin"] = rng.choice(ids)
        if c == "unpin":
            r.pop("pin", None)
        if c == "move" and "repeat" not in r:
            d = D.timedelta(minutes=rng.choice([-60, -30, 30, 60]))
            r["start"] += d
            if "end" in r:
                r["end"] += d
        if c == "withdraw":
            r["withdrawn"] = True
        if c == "size":
            r["size"] = rng.choice([5, 15, 25])
        if c == "needs":
            r["needs"] = ["p"]
        if c == "weight":
            r["weight"] = rng.randint(1, 5)
        if c == "tog" and ("repeat" in r or "also" in r):
            if r.get("together"):
                r.pop("together")
            else:
                r["together"] = True
        if c == "close" and doc.get("resource"):
            R = rng.choice(doc["resource"])
            f = D.datetime.combine(r["start"].date() + D.timedelta(days=rng.randint(0, 3)), D.time(8))
            R.setdefault("closed", []).append({"from": f, "to": f + D.timedelta(hours=rng.choice([2, 6, 48]))})
        if c == "newreq":
            s = r["start"]
            doc["request"].append({"id": f"n{len(doc['request'])}", "start": s, "length": "1h"})
        if c == "seats" and doc.get("resource"):
            rng.choice(doc["resource"])["seats"] = 10
        if c == "len" and "length" in r:
            r["length"] = "2h30m"
        if c == "drop" and len(doc["request"]) > 2 and not any(o["of"] == r["id"] for o in doc.get("occurrence", [])):
            doc["request"].remove(r)
        if c == "occ" and ("repeat" in r or "also" in r):
            t = {**r}
            t.pop("withdrawn", None)
            pp, _ = expand({"timetable": doc["timetable"], "request": [t]})
            if pp:
                p = rng.choice(pp)
                dt = p["local"] if "T" in p["name"] else p["local"].date()
                if not any(o["of"] == r["id"] and o["date"] == dt for o in doc.get("occurrence", [])):
                    o = {"of": r["id"], "date": dt}
                    if rng.random() < 0.5:
                        o["start"] = p["local"] + D.timedelta(minutes=rng.choice([-30, 30, 60]))
                    if ids and rng.random() < 0.4:
                        o["pin"] = rng.choice(ids)
                    if rng.random() < 0.2:
                        o["withdrawn"] = True
                    doc.setdefault("occurrence", []).append(o)


def compare_counts(folder, seed):
    """One timetable: what is wrong with its count."""
    doc = gen(random.Random(seed))
    if not expand(doc)[0]:
        return None
    path = os.path.join(folder, "count.toml")
    with open(path, "w") as file:
        file.write(emit(doc))
    code, out, err = run("count", path, "--json", "--seconds", "3")
    if code not in (0, 3, 4):
        return [("exit", code, err[:300])]
    said = json.loads(out)
    wrong = checkplan(doc, said)
    truth = solve(doc)
    if said["unplaced_weight"] != truth["unplaced"]:
        wrong.append(("weight", said["unplaced_weight"], truth))
    elif truth["unplaced"] == 0 and said["in_use"] != truth["count"]:
        wrong.append(("count", said["in_use"], truth))
    if said["unplaced_floor"] > truth["unplaced"] or said["floor"] < said["clique"]:
        wrong.append(("floors", said["unplaced_floor"], said["floor"], said["clique"], truth))
    if truth["unplaced"] == 0 and max(said["floor"], said["clique"]) > truth["count"]:
        wrong.append(("floor", said["floor"], said["clique"], truth))
    expected = "impossible" if truth["unplaced"] else "proved"
    if said["state"] != expected:
        wrong.append(("state", said["state"], truth))
    return wrong


def compare_changes(folder, seed):
    """One timetable that is planned and edited: what is wrong with what changes."""
    rng = random.Random(seed * 7 + 1)
    prefer = rng.random() < 0.4
    doc = gen(rng, prefer=prefer)
    soften(doc, rng)
    # Where resources are made as needed there may be fewer of them after an edit.
    pooled = any(kind["count"] == "as needed" for kind in doc.get("kind", []))
    if pooled or not (doc.get("kind") or doc.get("resource")) or not expand(doc)[0]:
        return None
    path, plan = (os.path.join(folder, name) for name in ("changes.toml", "changes.plan.toml"))
    with open(path, "w") as file:
        file.write(emit(doc))
    if os.path.exists(plan):
        os.remove(plan)
    code, _, err = run("apply", path, "-", "--seconds", "3", inp='set q0 title "z"\n')
    if code not in (0, 3, 4):
        return [("apply", code, err[:300])] if code == 1 else None
    if run("audit", path)[0] not in (0, 4):
        return [("audit",)]
    with open(plan, "rb") as file:
        old = {p["piece"]: p["resource"] for p in tomllib.load(file).get("placement", [])}
    edit(doc, rng)
    if not expand(doc)[0]:
        return None
    with open(path, "w") as file:
        file.write(emit(doc))
    code, out, err = run("count", path, "--json", "--seconds", "3")
    if code not in (0, 3, 4):
        return [("exit", code, err[:300])] if code == 1 else None
    said = json.loads(out)
    wrong = checkplan(doc, said)
    order = ("unplaced", "reloc", "count") if prefer else ("unplaced", "count", "reloc")
    truth = solve(doc, order, old)
    moved = sum(1 for p, r in said["placements"].items() if p in old and old[p] != r)
    if said["relocated"] != moved or said["relocated_floor"] > truth["reloc"]:
        wrong.append(("relocated", said["relocated"], said["relocated_floor"], moved, truth))
    if said["unplaced_weight"] != truth["unplaced"]:
        wrong.append(("weight", said["unplaced_weight"], truth))
    elif truth["unplaced"] == 0 and (truth["reloc"], truth["count"]) != (moved, said["in_use"]):
        wrong.append(("aims", said["in_use"], moved, truth))
    return wrong


def main():
    count, first = int(sys.argv[2]), int(sys.argv[3])
    with tempfile.TemporaryDirectory() as folder:
        for compare in (compare_counts, compare_changes):
            looked_at = disagreements = 0
            for seed in range(first * 100_000, first * 100_000 + count):
                wrong = compare(folder, seed)
                looked_at += wrong is not None
                if wrong:
                    disagreements += 1
                    print(compare.__name__, seed, wrong[:3], flush=True)
            print(f"{compare.__name__}: {looked_at} looked at, {disagreements} disagreements")


if __name__ == "__main__":
    PROGRAM = sys.argv[1]
    main()
