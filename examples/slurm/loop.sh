#!/bin/bash
# The same without a scheduler: N shares side by side on this machine (or, run on
# several machines that share a filesystem, some shares on each), then a gathering.
#
#   loop.sh JOB.toml N          all shares here, all at once
#   loop.sh JOB.toml N 3 5      only these; the last machine to end gathers
#
# On one machine a plain `catenrich run JOB.toml` does the same, and better: it
# gives a large file all processors.
set -uo pipefail
job=${1:?usage: loop.sh JOB.toml N [SHARE…]}
of=${2:?usage: loop.sh JOB.toml N [SHARE…]}
shift 2
[ "$#" -gt 0 ] || set -- $(seq "$of")
catenrich=${CATENRICH:-catenrich}

pids=()
for share; do
	"$catenrich" run "$job" --share "$share/$of" --workers 1 --wait --quiet &
	pids+=($!)
done
for pid in "${pids[@]}"; do
	wait "$pid" || echo "process $pid: exit code $?" >&2
done

# Whatever became of the shares: the gathering looks at the files, and says
# with exit code 75 what to do again.
exec "$catenrich" gather "$job" --shares "$of"
