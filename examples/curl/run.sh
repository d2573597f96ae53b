#!/bin/sh
# Send job.json to a Fishplate server with curl, wait, and fetch what a person files.
#
#     run.sh [URL [FOLDER]]
#
# Where the server wants a token, put it into FISHPLATE_TOKEN.
set -eu
url=${1:-http://127.0.0.1:8470}
out=${2:-results}
job=$(dirname "$0")/job.json
mkdir -p "$out"

ask() {
    curl --silent --show-error --fail-with-body \
        ${FISHPLATE_TOKEN:+--oauth2-bearer "$FISHPLATE_TOKEN"} "$@"
}

# The key makes a repeated call harmless: the same document is the same job.
ask --dump-header "$out/headers" --output "$out/answer.json" \
    --header 'Content-Type: application/json' \
    --header "Idempotency-Key: $(sha256sum "$job" | cut -d ' ' -f 1)" \
    --data-binary "@$job" "$url/v1/jobs" || { cat "$out/answer.json"; exit 1; }
here=$(tr -d '\r' < "$out/headers" | sed -n 's/^[Ll]ocation: //p')
echo "The job is $url$here"

# Results are there (200) when the job is finished. Before that, and where it failed, the answer is
# a problem (409) that says which of the two it is.
while true; do
    ask --output "$out/answer.json" --header 'Prefer: wait=30' "$url$here"
    ask --output "$out/results.json" "$url$here/results" 2> /dev/null && break
    grep -q 'problem-not-finished' "$out/results.json" || { cat "$out/results.json"; exit 1; }
done

ask --output "$out/sheet.html" "$url$here/sheet"
ask --output "$out/peaks.csv" "$url$here/tables/peaks.csv"
ask --output "$out/archive.zip" "$url$here/archive.zip"
rm -f "$out/headers" "$out/answer.json"
echo "Written to $out: sheet.html (read it first), peaks.csv, results.json, archive.zip"
