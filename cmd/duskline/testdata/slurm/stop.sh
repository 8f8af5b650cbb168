#!/bin/bash
# stop.sh DIR: cancel what is left, then end exactly the daemons start.sh started (by pid)
D=$(realpath -m "${1:?dir}"); export SLURM_CONF=$D/etc/slurm.conf
[ -s "$D/run/pids" ] || exit 0
scancel -Q --state=PENDING -u "$(id -un)" 2>/dev/null; scancel -Q -f -u "$(id -un)" 2>/dev/null
for i in $(seq 100); do [ -z "$(timeout 5 squeue -h -o %i 2>/dev/null)" ] && break; sleep 0.1; done
stop() { for p in "$@"; do kill -TERM "$p" 2>/dev/null; done
  for p in "$@"; do for i in $(seq 150); do kill -0 "$p" 2>/dev/null || break; sleep 0.1; done
    kill -0 "$p" 2>/dev/null && { echo "pid $p did not end; KILL" >&2; kill -KILL "$p"; }; done; }
mapfile -t P < "$D/run/pids"            # order written: munged, slurmctld, slurmd...
stop "${P[@]:1}"; stop "${P[0]}"        # munged last: the others sign their goodbyes with it
rm -f "$D/run/pids"
