#!/bin/sh
# A sweep on the workers of one SLURM job, on as many nodes as it has; they find the scheduler through a file:
#
#   sbatch --ntasks=64 scripts/slurm_dask.sh wells.yaml
#
# What follows the configuration is handed to mcgeo sweep. More workers may join from other jobs while it runs, by the
# command of the workers below with the scheduler file that the log names. DASK_INTERFACE=ib0 chooses the network.
# The extra of the installation that brings dask is mcgeo[cluster].
#
#SBATCH --job-name=mcgeo
#SBATCH --cpus-per-task=1
#SBATCH --mem-per-cpu=2G
#SBATCH --time=04:00:00
#SBATCH --output=%x-%j.log
#
# Two minutes before the time is over this shell is told, and tells the sweep, which tells the workers to keep their
# whole blocks; submitted again, it goes on from there.
#SBATCH --signal=B:TERM@120
set -eu
config=$1
shift
# One thread per library call: the kernels bring their own threads.
export OMP_NUM_THREADS=1 OPENBLAS_NUM_THREADS=1 MKL_NUM_THREADS=1
place=$(mktemp -d "$PWD/scheduler-XXXXXX")
file=$place/scheduler.json
scheduler='' workers=''
# shellcheck disable=SC2329  # called by the trap
end() {
    for process in $workers $scheduler; do
        kill "$process" 2>/dev/null || true
    done
    wait
    rm -rf "$place"
}
trap end EXIT
echo "scheduler file: $file" >&2
dask scheduler --scheduler-file "$file" --port 0 --no-dashboard --no-show \
    ${DASK_INTERFACE:+--interface "$DASK_INTERFACE"} &
scheduler=$!
# A worker of one thread per task of the job. Its memory is watched: one that takes too much is started anew.
srun dask worker --scheduler-file "$file" --nthreads 1 --no-dashboard --death-timeout 120 \
    --local-directory "${TMPDIR:-/tmp}" ${DASK_INTERFACE:+--interface "$DASK_INTERFACE"} &
workers=$!
mcgeo sweep "$config" --scheduler "$file" "$@" &
sweep=$!
trap 'kill -TERM "$sweep"' TERM INT
status=0
wait "$sweep" || status=$?
# A signal ends the waiting at once, the sweep only when its workers have stopped.
while kill -0 "$sweep" 2>/dev/null; do
    status=0
    wait "$sweep" || status=$?
done
exit "$status"
