#!/usr/bin/env python3
"""Steps a sink through a few currents by hand and prints what it reads back.

    drive_by_hand.py http://127.0.0.1:7070 left "0.1 A" "0.5 A" "1 A"

Python's standard library alone. The script is its own deadman: it asks for the setpoint again
three times within the interval, and if it dies, hangs or loses the network, the sink goes off.
The device under test and the interlocks below are for the invented cell K-01: put in your own,
after your cell's data sheet.
"""

import json
import sys
import time
import urllib.error
import urllib.request
import uuid

DAEMON, SINK, CURRENTS = sys.argv[1], sys.argv[2], sys.argv[3:]
INTERVAL_S = 3
HOLD_S = 1.5


def ask(method, path, body=None, headers=None):
    """Asks the daemon; gives the answer, or ends with what the daemon says is wrong."""
    request = urllib.request.Request(DAEMON + path, method=method, headers=headers or {})
    if body is not None:
        request.data = json.dumps(body).encode()
        request.add_header("Content-Type", "application/json")
    try:
        with urllib.request.urlopen(request, timeout=INTERVAL_S) as answer:
            return json.load(answer)
    except urllib.error.HTTPError as error:
        problem = json.load(error)
        lines = [f"{problem['code']}: {problem['detail']}"]
        for finding in problem.get("findings", []):
            lines.append(f"  {finding['pointer']}: {finding['message']}; {finding['hint']}")
        raise SystemExit("\n".join(lines)) from None


run = ask(
    "POST",
    "/v1/runs/by-hand",
    {
        "sink": SINK,
        "dut": {
            "label": "K-01",
            "kind": "cell",
            "rated_capacity": "3.2 Ah",
            "voltage_min": "2.5 V",
            "voltage_max": "4.2 V",
            "current_max": "6.4 A",
        },
        "interlocks": {"undervoltage": {"below": "2.75 V", "for": "0 s"}},
        "interval": f"{INTERVAL_S} s",
        "readback": "200 ms",
        "title": "Steps by hand",
    },
    {"Idempotency-Key": str(uuid.uuid4())},
)
path = f"/v1/runs/{run['id']}"
try:
    for current in CURRENTS:
        run = ask("POST", f"{path}/setpoint", {"setpoint": current})
        until = time.monotonic() + HOLD_S
        while time.monotonic() < until:
            time.sleep(min(INTERVAL_S / 3, HOLD_S / 3))
            run = ask("POST", f"{path}/renew")
        reading = run["reading"]
        print(f"{current}: {reading['current_a']:.4f} A at {reading['voltage_v']:.4f} V")
finally:
    # However this ends: off. Without it the sink would go off by itself, a little later.
    ask("POST", f"/v1/sinks/{SINK}/off")

while not run["sealed"]:
    time.sleep(0.2)
    run = ask("GET", path)
print(f"{run['ending']['how']}: {run['ending']['reason']}; the record is {run['record']}")
