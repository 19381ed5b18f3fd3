#!/usr/bin/env bash
# One task of a job array: its share of a screen. Submit both jobs from the folder with the data:
#
#   screen=$(sbatch --parsable --array=1-20 workflows/slurm-array.sh ROOT DIR)
#   sbatch --dependency=afterany:$screen workflows/slurm-shortlist.sh ROOT DIR
#
# ROOT is a folder of cases or a list (.csv), DIR takes the dossiers and must be seen by all nodes.
# Further words are options of `topovet screen`, such as --effort thorough; give both jobs the same.
# TOPOVET names the program where it is not on the path. A task that is preempted or whose node fails
# is queued again and goes on from its finished cases; whatever is submitted twice is not done twice.
# To run single tasks again say how many there were: TOPOVET_SHARDS=20 sbatch --array=3,7 ...
#SBATCH --job-name=topovet-screen
#SBATCH --cpus-per-task=1
#SBATCH --mem=4G
#SBATCH --time=08:00:00
#SBATCH --requeue
#SBATCH --open-mode=append
#SBATCH --output=topovet-%A_%a.log
# a minute before the time is up: finish in an orderly way
#SBATCH --signal=B:TERM@60
set -euo pipefail
[ $# -ge 2 ] || { echo "usage: sbatch --array=1-N slurm-array.sh ROOT DIR [OPTION]..." >&2; exit 2; }
root=$1 dossiers=$2
shift 2
shard=${SLURM_ARRAY_TASK_ID:?submit it with --array=1-N}/${TOPOVET_SHARDS:-$SLURM_ARRAY_TASK_MAX}
# exec: signals reach the program itself
exec "${TOPOVET:-topovet}" screen "$root" --out "$dossiers" --shard "$shard" "$@"
