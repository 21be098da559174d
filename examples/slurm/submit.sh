#!/bin/bash
# Makes a release on a Slurm cluster: an array of N shares, then a gathering.
#
#   submit.sh JOB.toml N            all shares
#   submit.sh JOB.toml N 3,5        only these, again
#   submit.sh --wait JOB.toml N     and wait for the end, with its exit code
#
# Options for sbatch, such as an account or partition, go into SBATCH_ACCOUNT,
# SBATCH_PARTITION and so on, which sbatch reads itself.
set -euo pipefail
here=$(cd "$(dirname "$0")" && pwd)

wait=
if [ "${1:-}" = --wait ]; then
	wait=yes
	shift
fi
job=${1:?usage: submit.sh [--wait] JOB.toml N [SHARES]}
of=${2:?usage: submit.sh [--wait] JOB.toml N [SHARES]}
which=${3:-1-$of}

# The shares are a function of the files that match now. Nothing may be added or
# removed until the gathering: it would find what fell between.
"${CATENRICH:-catenrich}" plan "$job" --shares "$of" | tail -n "$((of + 4))"

array=$(sbatch --parsable --array="$which" "$here/share.sbatch" "$job" "$of")
array=${array%%;*} # on a federation the cluster's name follows

# afterany, not afterok: if a share failed, afterok would leave the gathering in
# the queue for ever or drop it, and nobody would say what is missing.
# The gathering trusts no job's state: it looks at the files.
gather=$(sbatch --parsable --dependency="afterany:$array" --kill-on-invalid-dep=yes "$here/gather.sbatch" "$job" "$of")
gather=${gather%%;*}
echo "shares: job $array; gathering: job $gather"
[ -n "$wait" ] || exit 0

# `sbatch --wait` is not used: it returns 0 for jobs that were cancelled, timed
# out or dropped, and waits for ever if the controller dies. This asks for the
# state, for at most PATIENCE seconds.
deadline=$((SECONDS + ${PATIENCE:-86400}))
while [ "$SECONDS" -lt "$deadline" ]; do
	line=$(scontrol show job -o "$gather" 2>/dev/null || true)
	state=$(sed -n 's/.* JobState=\([A-Z_]*\).*/\1/p' <<<"$line")
	case $state in
	COMPLETED)
		echo "gathering: $state"
		exit 0
		;;
	PENDING | RUNNING | COMPLETING | CONFIGURING | REQUEUED | SUSPENDED | "") sleep "${POLL:-10}" ;;
	*)
		code=$(sed -n 's/.* ExitCode=\([0-9]*\):.*/\1/p' <<<"$line")
		echo "gathering: $state, exit code ${code:-unknown}; see gather-$gather.log" >&2
		exit "$((${code:-0} > 0 ? ${code:-0} : 75))"
		;;
	esac
done
echo "gathering: no end within ${PATIENCE:-86400} s" >&2
exit 75
