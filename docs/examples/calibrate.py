#!/usr/bin/env python3
"""Calibrates a sink: the daemon holds each setpoint, a program of yours reads the meters.

    calibrate.py http://127.0.0.1:7070 left calibration.json READER [ARGUMENT...]

Python's standard library alone. `calibration.json` is the request's body without the sink: the
source, the interlocks, the setpoints, and the statement of who measures with which meters.
READER is started at each settled setpoint, with the nominal setpoint in amperes as its last
argument (so that it can choose a range), and prints what the meters read as JSON, such as
{"current": "0.4986 A", "voltage": "3.702 V"}.
"""

import json
import subprocess
import sys
import threading
import time
import urllib.error
import urllib.request
import uuid

DAEMON, SINK, REQUEST, READER = sys.argv[1], sys.argv[2], sys.argv[3], sys.argv[4:]


def ask(method, path, body=None, headers=None):
    """Asks the daemon; gives the answer, or ends with what the daemon says is wrong."""
    request = urllib.request.Request(DAEMON + path, method=method, headers=headers or {})
    if body is not None:
        request.data = json.dumps(body).encode()
        request.add_header("Content-Type", "application/json")
    try:
        with urllib.request.urlopen(request, timeout=20) as answer:
            return json.load(answer)
    except urllib.error.HTTPError as error:
        problem = json.load(error)
        lines = [f"{problem['code']}: {problem['detail']}"]
        for finding in problem.get("findings", []):
            lines.append(f"  {finding['pointer']}: {finding['message']}; {finding['hint']}")
        raise SystemExit("\n".join(lines)) from None


with open(REQUEST, encoding="utf-8") as file:
    body = {**json.load(file), "sink": SINK}
key = {"Idempotency-Key": str(uuid.uuid4())}
state = ask("POST", "/v1/calibrations", body, key)
path = f"/v1/calibrations/{state['id']}"
interval_s = state["run"]["by_hand"]["interval_s"]
over = threading.Event()


def renew():
    """Asks for the setpoint again while the meters are read, as long as this script lives."""
    while not over.wait(min(1.0, interval_s / 10)):
        try:
            ask("POST", f"/v1/runs/{state['id']}/renew")
        except (SystemExit, OSError):
            return


threading.Thread(target=renew, daemon=True).start()
try:
    while state["state"] not in ("taken", "ended"):
        if state["state"] == "settling":
            time.sleep(0.05)
            state = ask("GET", path)
            continue
        setpoint = state["setpoint_a"]
        reader = subprocess.run([*READER, str(setpoint)], capture_output=True, check=True)
        read = json.loads(reader.stdout)
        print(f"point {state['point']} of {state['points']}, {setpoint} A nominal: {read}")
        state = ask("POST", f"{path}/reading", read)
    outcome = ask("POST", f"{path}/finish")
finally:
    over.set()
    ask("POST", f"/v1/sinks/{SINK}/off")

certificate = outcome["certificate"]
if certificate:
    for line in certificate["lines"]:
        print(
            f"{line['channel']}: {line['offset']:+.6f} {line['unit']} and a slope of "
            f"{line['slope']:.6f}, largest residual {line['largest_residual']:+.6f} {line['unit']}"
        )
    print(f"written to {outcome['file']}")
    print(f"to use it, write {outcome['bench_entry']} into the sink's entry of the bench file")
else:
    verification = outcome["verification"]
    for point in verification["points"]:
        verdict = "passed" if point["passed"] else "FAILED"
        print(f"{point['channel']} at {point['nominal']} {point['unit']}: {verdict}, "
              f"E_n = {point['normalised_error']:+.2f}")
    sys.exit(0 if verification["passed"] else 1)
