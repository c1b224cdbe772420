#!/usr/bin/env python3
"""Runs a sequence overnight and prints its figures in the morning.

    run_overnight.py http://127.0.0.1:7070 sequence.json left K-01

Python's standard library alone. Sleep, a lost network or a restarted daemon do not disturb it:
it asks again until the run is over. Interrupted (Ctrl-C), it stops the run.
"""

import json
import sys
import time
import urllib.error
import urllib.request
import uuid

DAEMON, SEQUENCE, SINK, DUT = sys.argv[1:5]


def ask(method, path, body=None, headers=None):
    """Asks the daemon; gives the answer, or raises with what the daemon says is wrong."""
    request = urllib.request.Request(DAEMON + path, method=method, headers=headers or {})
    if body is not None:
        request.data = json.dumps(body).encode()
        request.add_header("Content-Type", "application/json")
    try:
        with urllib.request.urlopen(request, timeout=120) as answer:
            return json.load(answer)
    except urllib.error.HTTPError as error:
        problem = json.load(error)
        lines = [f"{problem['code']}: {problem['detail']}"]
        for finding in problem.get("findings", []):
            place = finding.get("place") or {"line": 0, "column": 0}
            lines.append(
                f"  line {place['line']}, column {place['column']}: "
                f"{finding['message']}; {finding['hint']}"
            )
        raise SystemExit("\n".join(lines)) from None


def patiently(method, path, body=None, headers=None):
    """The same, again and again while nobody answers."""
    while True:
        try:
            return ask(method, path, body, headers)
        except (urllib.error.URLError, TimeoutError, ConnectionError) as error:
            print(f"no answer ({error}), trying again", file=sys.stderr)
            time.sleep(5)


with open(SEQUENCE, encoding="utf-8") as file:
    # The text, not what it means: so the findings point at the file's own lines.
    request = {"sequence": file.read(), "sink": SINK, "dut": DUT}

rehearsal = ask("POST", "/v1/sequences/rehearse", request)
print(
    f"rehearsed: {rehearsal['ending']['how']} after {rehearsal['duration_s']:.0f} s, "
    f"{rehearsal['charge_ah']:.4f} Ah"
)

# One key for this run: repeated requests start nothing twice.
key = {"Idempotency-Key": str(uuid.uuid4())}
run = patiently("POST", "/v1/runs", request, key)
print(f"run {run['id']} on {run['sink']} with {run['dut']}")
try:
    while not run["sealed"]:
        time.sleep(min(10, max(0.2, run["expected_s"] / 1000)))
        run = patiently("GET", f"/v1/runs/{run['id']}")
except KeyboardInterrupt:
    run = ask("POST", f"/v1/runs/{run['id']}/stop")
    print("stopped", file=sys.stderr)

ending = run["ending"] or {"how": run["state"], "reason": None}
print(ending["how"] + (f": {ending['reason']}" if ending["reason"] else ""))
print(f"{run['charge_ah']:.4f} Ah, {run['energy_wh']:.4f} Wh in {run['elapsed_s']:.0f} s")

figures = ask("GET", f"/v1/records/{run['id']}/figures")["figures"]
for figure in figures["figures"]:
    print(json.dumps(figure))
sys.exit(0 if ending["how"] == "finished" else 1)
