#!/bin/sh
# What has become of a Slurm job: prints running, success or failed.
# A controller that cannot be reached tells nothing about the job, so that it counts as running;
# a job that the controller does not know (any more) is to be done again.
if answer=$(squeue --noheader --states=all --jobs="$1" --format=%T 2>&1); then
    known=yes
else
    known=no
fi

case $known:$answer in
    yes:COMPLETED) echo success ;;
    yes:BOOT_FAIL | yes:CANCELLED | yes:DEADLINE | yes:FAILED | yes:NODE_FAIL) echo failed ;;
    yes:OUT_OF_MEMORY | yes:PREEMPTED | yes:REVOKED | yes:TIMEOUT) echo failed ;;
    yes: | no:*"Invalid job id"*) echo failed ;;
    *) echo running ;;
esac
