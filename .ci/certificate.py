"""Holds the forms of a certificate to the bench, to the record and to each other.

usage: certificate.py BENCH.toml RECORD.json FOLDER

FOLDER has c.txt (text of the PDF), printed.txt (text of the HTML as a browser
printed it) and c.xml. Every mandatory item of the bench must stand in all three;
every number must be the record's, rounded here with decimal arithmetic.
"""
import json
import re
import sys
import tomllib
import xml.etree.ElementTree as ET
from decimal import ROUND_HALF_EVEN, Decimal

bench = tomllib.load(open(sys.argv[1], "rb"))
record = json.load(open(sys.argv[2]))
folder = sys.argv[3]
flat = lambda s: re.sub(r"\s+", " ", s.replace("\u2212", "-").replace("\u00a0", " "))
forms = {"PDF": flat(open(f"{folder}/c.txt").read()), "HTML": flat(open(f"{folder}/printed.txt").read())}
root = ET.parse(f"{folder}/c.xml").getroot()
forms["XML"] = flat(" ".join(root.itertext()))
dcc, si = "{https://ptb.de/dcc}", "{https://ptb.de/si}"
bad = 0


def complain(text):
    global bad
    bad += 1
    print("MISSING:", text)


def must(item, text):
    for form, all in forms.items():
        if text not in all:
            complain(f"{form} lacks {item}: {text!r}")


w, c, it = bench["work"], bench["client"], bench["item"]
items = {
    "title": w["title"], "laboratory": w["laboratory"], "its address": w["address"], "place": w["place"],
    "identification": w["certificate"], "client": c["name"], "client's address": c["address"], "method": w["method"],
    "item": it["description"], "maker": it["maker"], "model": it["model"], "serial": it["serial"], "condition": it["condition"],
    "firmware": it["firmware"], "range": it["range"], "received": str(w["received"]), "performed": str(w["performed"]),
    "issued": str(w["issued"]), "relates only": "relates only to the item", "traceability": w["traceability"],
    "authorised by": w["authorised_by"], "function": w["function"], "checked by": w["checked_by"],
    "deviations": "deviations from the method", "specification": bench["limits"]["source"],
    "decision rule": bench["limits"]["rule"].replace("-", " ").split()[0], "mounting": bench["mounting"]["kind"],
    "reference plane": bench["mounting"]["reference_plane"], "orientation": bench["mounting"]["orientation"],
    "sign convention": bench["mounting"]["sign_convention"], "spacing method": bench["spacing"]["method"],
    "plates": bench["spacing"]["description"], "drive": bench["drive"]["kind"].replace("-", " "), "dc, rms or peak": bench["drive"]["value"],
    "definition": "reference over indicated field", "temperature": "temperature", "humidity": "humidity",
    "caution": "licensed practice", "probability of conformity": "probability of conformity",
}
for instrument in bench["instruments"].values():
    for key in ("serial", "certificate", "issued_by", "calibrated", "due"):
        items[f"{instrument['serial']} {key}"] = str(instrument[key])
for item, text in items.items():
    must(item, text)

for form in ("PDF", "HTML"):
    n = int(re.search(r"Page 1 of (\d+)", forms[form]).group(1))
    for page in range(1, n + 1):
        if f"Page {page} of {n}" not in forms[form]:
            complain(f"{form} lacks page {page} of {n}")
    if forms[form].count("Certificate " + w["certificate"]) < n:
        complain(f"{form}: the identification does not stand on every page")
    if "End of certificate " + w["certificate"] not in forms[form]:
        complain(f"{form} lacks the end mark")
    if "recalibration" in forms[form]:
        complain(f"{form} names a recalibration that was not agreed")


def rounded(value, u, least=Decimal(0)):
    """Two digits of U, the value to the same place; U not below least."""
    u = Decimal(repr(u))
    place = u.adjusted() - 1
    q = Decimal(1).scaleb(place)
    two = u.quantize(q, ROUND_HALF_EVEN)
    if two < least:
        two = (two + q).quantize(q)
    if two.adjusted() - 1 != place:
        place = two.adjusted() - 1
        q = Decimal(1).scaleb(place)
        two = two.quantize(q)
    if two < u * Decimal("0.95"):
        complain(f"U = {u} would be rounded down by more than 5 %")
    return str(Decimal(repr(value)).quantize(q, ROUND_HALF_EVEN)), str(two)


def stated(m, capable=True):
    u, k = m["k"] * m["u"], m["k"]
    cap = bench.get("capability") if capable else None
    least = Decimal(0)
    if cap:
        part = float(cap["relative_expanded"].split()[0]) / 100 * abs(m["value"])
        if u < part:
            u, k, least = part, cap["k"], Decimal(repr(part))
    return *rounded(m["value"], u, least), f"{k:.2f}"


base = bench["report"]["definition"]
wanted = []
for m in record["measurands"]:
    if m["name"].startswith(base):
        wanted.append((m["name"], stated(m)))
    elif m["name"].startswith("shift of " + base):
        wanted.append((m["name"], stated(m, capable=False)))
reals = [(r.findtext(f"{si}value"), r.findtext(f".//{si}valueExpandedMU"), r.findtext(f".//{si}coverageFactor")) for r in root.iter(f"{si}real")]
for name, (v, u, k) in wanted:
    for form in ("PDF", "HTML"):
        if f" {v} {u} {k}" not in forms[form]:
            complain(f"{form} lacks {name} = {v}, U = {u}, k = {k}")
    if (v, u, k) not in reals:
        complain(f"XML lacks {name} = {v}, U = {u}, k = {k}; it has {reals}")

lists = [e for e in root.iter(f"{dcc}list")]
if len(lists) != len(record["series"]):
    complain(f"XML has {len(lists)} lists of points, the record {len(record['series'])} series")
for series, element in zip(record["series"], lists):
    values = [q.findtext(f".//{si}valueXMLList").split() for q in element.iter(f"{dcc}quantity")]
    expanded = element.findtext(f".//{si}valueExpandedMUXMLList").split()
    factors = element.findtext(f".//{si}coverageFactorXMLList").split()
    if {len(x) for x in values + [expanded, factors]} != {len(series["points"])}:
        complain(f"XML: the lists of {series['name']} differ in length")
    for i, p in enumerate(series["points"]):
        v, u, k = stated({"value": p["value"], "u": p["u"], "k": p["k"]})
        level, indication, alone = values[0][i], values[1][i], values[2][i]
        if (values[3][i], expanded[i], factors[i]) != (v, u, k):
            complain(f"XML: {series['name']} point {i + 1} states {values[3][i]}, {expanded[i]}, {factors[i]}, the record {v}, {u}, {k}")
        if abs(Decimal(alone) - Decimal(repr(p["observed"]))) > Decimal(1).scaleb(Decimal(v).as_tuple().exponent) / 2:
            complain(f"XML: {series['name']} point {i + 1} by itself is {alone}, the record has {p['observed']}")
        row = f"{level} {p['rows']} {indication} {alone} {v} {u} {k}"
        for form in ("PDF", "HTML"):
            if row not in forms[form]:
                complain(f"{form} lacks the row {row!r}")
print(f"{len(items)} items, {len(wanted)} results and {sum(len(s['points']) for s in record['series'])} points stand in PDF, HTML and XML" if not bad else f"{bad} things are missing")
sys.exit(1 if bad else 0)
