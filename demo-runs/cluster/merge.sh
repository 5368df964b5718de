#!/bin/bash
#SBATCH --job-name=stepgauge-merge
#SBATCH --nodes=1
#SBATCH --ntasks=1
#SBATCH --time=00:10:00
# Joins the reports of all parts once they are there; submit.sh starts it after the array job.
# Its exit status is that of the undivided audit: 0 all in order, 1 something is not, 2 it
# could not be done, which includes a part that is missing. `sacct` and mails show it.
set -uo pipefail

parts=$1
reports=$2

given=()
for number in $(seq "$parts"); do
    # One that is not there is not given: `merge` names all that are missing at once.
    [ -s "$reports/part-$number.json" ] && given+=("$reports/part-$number.json")
done
if [ ${#given[@]} -eq 0 ]; then
    echo "no part has left a report; see $reports/part-*.log" >&2
    exit 2
fi
exec "${STEPGAUGE:-stepgauge}" merge "${given[@]}" --write "$reports/report.json"
