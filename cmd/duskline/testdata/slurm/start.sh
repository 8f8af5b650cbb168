#!/bin/bash
# start.sh DIR: private munged + slurmctld + two slurmd (node1, node2) on 127.0.0.1; all files under DIR.
# DIR: short absolute path (a unix socket lives in it), owned by root, no group/other-writable parent except sticky /tmp.
set -euo pipefail
D=$(realpath -m "${1:?dir}"); PORT=${SLURM_TEST_PORT:-16817}
mkdir -p "$D"/{etc,munge,state,spool/node1,spool/node2,run,log}
chmod 0755 "$D"; chmod 0711 "$D/munge"        # 0711: non-root users may reach the socket, not the key
( umask 077; head -c 128 /dev/urandom > "$D/munge/key" )
cat > "$D/etc/slurm.conf" <<C
ClusterName=lanternridge
SlurmctldHost=localhost(127.0.0.1)
SlurmctldPort=$PORT
CommunicationParameters=NoCtldInAddrAny,NoInAddrAny
SlurmUser=root
SlurmdUser=root
AuthType=auth/munge
AuthInfo=socket=$D/munge/socket,cred_expire=5
CredType=cred/munge
MpiDefault=none
ProctrackType=proctrack/pgid
TaskPlugin=task/none
SwitchType=switch/none
PropagateResourceLimits=NONE
ReturnToService=2
SlurmdTimeout=6
KillWait=2
MinJobAge=3600
MaxArraySize=10001
MaxJobCount=20000
SchedulerType=sched/builtin
SchedulerParameters=batch_sched_delay=0,sched_interval=1
SelectType=select/cons_tres
SelectTypeParameters=CR_CPU
SlurmdParameters=config_overrides
AccountingStorageType=accounting_storage/none
JobAcctGatherType=jobacct_gather/none
JobCompType=jobcomp/filetxt
JobCompLoc=$D/log/jobcomp.txt
MailProg=/bin/true
StateSaveLocation=$D/state
SlurmdSpoolDir=$D/spool/%n
SlurmctldPidFile=$D/run/slurmctld.pid
SlurmdPidFile=$D/run/slurmd.%n.pid
SlurmctldLogFile=$D/log/slurmctld.log
SlurmdLogFile=$D/log/slurmd.%n.log
NodeName=node1 NodeHostname=localhost NodeAddr=127.0.0.1 Port=$((PORT+1)) CPUs=4 RealMemory=4000 State=UNKNOWN
NodeName=node2 NodeHostname=localhost NodeAddr=127.0.0.1 Port=$((PORT+2)) CPUs=4 RealMemory=4000 State=UNKNOWN
PartitionName=test Nodes=node1,node2 Default=YES MaxTime=INFINITE State=UP
C
export SLURM_CONF=$D/etc/slurm.conf
: > "$D/run/pids"
bg() { setsid "$@" </dev/null >>"$D/log/$(basename "$1").out" 2>&1 & echo $! >> "$D/run/pids"; }
bg munged -F --key-file="$D/munge/key" --socket="$D/munge/socket" --pid-file="$D/munge/pid" \
   --log-file="$D/log/munged.log" --seed-file="$D/munge/seed" --num-threads=2
for i in $(seq 100); do munge -n -S "$D/munge/socket" >/dev/null 2>&1 && break; sleep 0.05; done
bg slurmctld -D -c          # -c: clean state
bg slurmd -D -N node1
bg slurmd -D -N node2
for i in $(seq 200); do
  [ "$(sinfo -h -N -o %T 2>/dev/null | grep -c '^idle$')" = 2 ] && { echo "export SLURM_CONF=$SLURM_CONF"; exit 0; }
  sleep 0.1
done
echo "slurm is not ready" >&2; timeout 10 sinfo -N -l >&2 || true; tail -n 20 "$D"/log/*.out >&2; exit 1
