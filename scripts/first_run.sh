#!/bin/sh
# Set up a virtual environment beside this project and run the main job: sample, scan, two figures.
set -eu
cd "$(dirname "$0")/.."
. scripts/environment.sh
environment .venv ""
.venv/bin/mcgeo scan configs/first_run.yaml --out first_run_results
.venv/bin/mcgeo plot hole first_run_results
.venv/bin/mcgeo plot energy first_run_results
