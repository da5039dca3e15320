#!/bin/sh
# Set up a virtual environment with the test tools and pass every check of the default run.
set -eu
cd "$(dirname "$0")/.."
. scripts/environment.sh
environment .venv-test "[test]"
bin=.venv-test/bin
$bin/ruff check .
$bin/mypy
$bin/lint-imports
# One thread per library call: the kernels bring their own threads.
export OMP_NUM_THREADS=1 OPENBLAS_NUM_THREADS=1
$bin/python -m pytest -n "${MCGEO_TEST_PROCESSES:-auto}" "$@"
# Kernels must also run as plain Python, where a debugger and a coverage tool see their lines.
if [ $# -eq 0 ]; then
    NUMBA_DISABLE_JIT=1 $bin/python -m pytest tests/plain
fi
