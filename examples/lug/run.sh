#!/bin/sh
# Solve this example without a server; the results go to results/ beside this file.
cd "$(dirname "$0")" && exec ../../.venv/bin/fishplate solve job.json --out results "$@"
