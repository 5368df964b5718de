#!/bin/bash
# Audits a tree of submissions on a cluster that runs Slurm: an array job audits one part
# in each of its tasks, a second job joins their reports.
#
#   demo-runs/cluster/submit.sh demo-runs 4 nightly
#
# The energy team of the shipyard sweeps alder, birch and cedar over far more cases and steps
# than one machine can audit over night; the same command with 200 parts does it on theirs.
#
# What lies in the folder afterwards (here `nightly/`):
#   part-1.json ...  reports of the parts
#   report.json      the report of the whole, the same bytes as from one undivided audit
#   *.log            what the tasks said; merge.log ends with the table
#
# The folder of the tree, this folder and the one of the reports must be seen by all nodes.
# Paths may be relative: jobs begin where they were submitted.
#
# STEPGAUGE  the program, where it is not on the path
# CPUS       processors for each task (4); each works on as many submissions at a time
# WAIT       set to 1, waits for the end and passes the exit status of the audit on
set -euo pipefail

if [ $# -ne 3 ]; then
    echo "usage: $0 TREE PARTS NEW-FOLDER" >&2
    exit 2
fi
tree=$1
parts=$2
reports=$3
here=$(dirname "$0")

if ! mkdir "$reports"; then
    # Reports of an earlier audit beside those of this one would be refused by `merge`.
    echo "$0: give a folder for the reports that is not there yet" >&2
    exit 2
fi

audit=$(sbatch --parsable --array="1-$parts" --cpus-per-task="${CPUS:-4}" \
    --output="$reports/part-%a.log" "$here/part.sh" "$tree" "$parts" "$reports")
# A cluster of several answers `id;cluster`.
audit=${audit%%;*}

# `afterany`, not `afterok`: where a node broke down, `merge` says which part is missing, while
# a job that waits for `afterok` would wait for ever and say nothing.
wait=()
[ "${WAIT:-0}" = 1 ] && wait=(--wait)
echo "job $audit audits $parts parts, the table will be in $reports/merge.log"
exec sbatch --dependency="afterany:$audit" "${wait[@]}" \
    --output="$reports/merge.log" "$here/merge.sh" "$parts" "$reports"
