#!/bin/sh
# A sweep as a SLURM array of jobs that know nothing of each other, in one folder that all nodes see:
#
#   sbatch --array=1-40 scripts/slurm_array.sh wells.yaml 40      # 40 shards
#   mcgeo sweep wells.yaml --gather                               # the tables, when all have ended
#
# What follows the number of shards is handed to mcgeo sweep. Ask here, or on the command line of sbatch, for the cores,
# the time and the memory of one job.
#
#SBATCH --job-name=mcgeo
#SBATCH --cpus-per-task=4
#SBATCH --mem-per-cpu=1G
#SBATCH --time=04:00:00
#SBATCH --output=%x-%A_%a.log
#
# Two minutes before its time is over a job is told to end. It then keeps its whole blocks and exits with 143; submitted
# again, it goes on from there. Only the shards that --gather lists need be: sbatch --array=3,17 ... wells.yaml 40.
#SBATCH --signal=B:TERM@120
set -eu
config=$1 shards=$2
shift 2
# One thread per library call: the kernels bring their own threads.
export OMP_NUM_THREADS=1 OPENBLAS_NUM_THREADS=1 MKL_NUM_THREADS=1
# In the place of this shell, so that the signal reaches it.
exec mcgeo sweep "$config" --shard "$SLURM_ARRAY_TASK_ID/$shards" --workers "${SLURM_CPUS_PER_TASK:-1}" "$@"
