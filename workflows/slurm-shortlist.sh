#!/usr/bin/env bash
# Runs when the array of slurm-array.sh has ended, however it ended: vets what a lost task left
# behind (nothing, as a rule), then ranks all that has been vetted. See there for how to submit it.
#SBATCH --job-name=topovet-shortlist
#SBATCH --cpus-per-task=1
#SBATCH --mem=4G
#SBATCH --time=08:00:00
#SBATCH --requeue
#SBATCH --open-mode=append
#SBATCH --output=topovet-shortlist-%j.log
#SBATCH --signal=B:TERM@60
set -euo pipefail
[ $# -ge 2 ] || { echo "usage: sbatch slurm-shortlist.sh ROOT DIR [OPTION]..." >&2; exit 2; }
root=$1 dossiers=$2
shift 2
topovet=${TOPOVET:-topovet}
# in the background, so that the shell can pass a signal on
"$topovet" screen "$root" --out "$dossiers" "$@" &
screen=$!
trap 'kill -TERM "$screen"; wait "$screen"; exit 143' TERM
wait "$screen" || echo "screen ended with exit code $?; ranking what there is" >&2
exec "$topovet" shortlist "$dossiers"
