#!/bin/bash
#SBATCH --job-name=stepgauge-part
#SBATCH --nodes=1
#SBATCH --ntasks=1
#SBATCH --time=04:00:00
# One task of the array: audits the part with its number. submit.sh starts it; where a single
# part was lost, audit that one again (here the third of four) and merge once more:
#
#   sbatch --array=3 demo-runs/cluster/part.sh demo-runs 4 nightly
#   sbatch demo-runs/cluster/merge.sh 4 nightly
set -uo pipefail

tree=$1
# Not SLURM_ARRAY_TASK_COUNT: it is 1 where one part is audited again.
parts=$2
reports=$3
number=$SLURM_ARRAY_TASK_ID
report=$reports/part-$number.json

# A report from before must not stand for this audit if it fails.
rm -f "$report"

"${STEPGAUGE:-stepgauge}" audit "$tree" --part "$number/$parts" --write "$report" \
    --threads "${SLURM_CPUS_PER_TASK:-1}"
status=$?

# Status 1 says that something failed the audit, 2 that some submission could not be audited:
# both are findings, and stand in the report. The task itself has failed only without a report.
if [ ! -s "$report" ]; then
    echo "part $number of $parts has left no report, stepgauge ended with status $status" >&2
    exit 2
fi
