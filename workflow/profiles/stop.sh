#!/bin/sh
# Cancel the Slurm jobs of the run in this folder, and wait until they are gone: sh workflow/profiles/stop.sh
# For a run whose Snakemake has died: its jobs run on, and would write beside those of the next run.
set -eu

# Jobs of this folder that wait or run; squeue prints number, blank, working folder.
here=$(pwd -P)
jobs() {
    squeue --me --noheader --format='%A %Z' | while read -r job folder; do
        [ "$folder" != "$here" ] || echo "$job"
    done
}

found=$(jobs)
if [ -z "$found" ]; then
    echo "no jobs of $here"
    exit
fi
# Unquoted: one word a job.
scancel $found
while [ -n "$(jobs)" ]; do
    sleep 1
done
echo "cancelled:" $found
