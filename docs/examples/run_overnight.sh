#!/bin/sh
# Runs a sequence overnight and fetches its readbacks in the morning.
#
#     run_overnight.sh http://127.0.0.1:7070 sequence.json left K-01
#
# curl and the usual tools alone.
set -eu
daemon=$1 sequence=$2 sink=$3 dut=$4

# A sequence is JSON itself, so it goes into the request as it is.
request=$(mktemp)
head=$(mktemp)
trap 'rm -f "$request" "$head"' EXIT
printf '{"sequence": %s, "sink": "%s", "dut": "%s"}' "$(cat "$sequence")" "$sink" "$dut" >"$request"

# Refused sequences come back as problem details, with every finding.
curl --silent --show-error --fail-with-body --output /dev/null \
    --header 'Content-Type: application/json' --data-binary "@$request" \
    "$daemon/v1/sequences/check"

# The key makes a repeated request harmless; --retry may repeat it.
curl --silent --show-error --fail-with-body --output /dev/null --dump-header "$head" \
    --retry 5 --retry-connrefused \
    --header 'Content-Type: application/json' \
    --header "Idempotency-Key: $(date +%s)-$$" \
    --data-binary "@$request" "$daemon/v1/runs"
run=$(sed -n 's|^[Ll]ocation: /v1/runs/\([0-9a-f-]*\).*|\1|p' "$head")
echo "run $run"

# To stop it from another terminal:
#     curl --request POST "$daemon/v1/runs/$run/stop"
# To turn every sink off, whatever it does:
#     curl --request POST "$daemon/v1/off"

while :; do
    state=$(curl --silent --show-error --retry 20 --retry-connrefused "$daemon/v1/runs/$run")
    case $state in
    *'"sealed":true'*) break ;;
    esac
    sleep 1
done
printf '%s\n' "$state" | sed 's/.*"how":"\([a-z]*\)".*/\1/'

# Every readback, one row each; with ?points=1000 the same in a thousand rows, extremes kept.
curl --silent --show-error --fail-with-body --output readings.csv \
    --header 'Accept: text/csv' "$daemon/v1/records/$run/readings"
echo "readings.csv: $(($(wc -l <readings.csv) - 1)) readbacks"
