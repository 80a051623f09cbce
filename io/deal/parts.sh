#!/bin/bash
# Written by holdfast deal. Each task of this job array makes one part of the
# {{.Parts}} of a run; the task's index is the number of the part. Tasks write into the
# run directory below, and can be killed and started again at any time.
#
#SBATCH --job-name={{option .Name}}
#SBATCH --array={{indexes .List}}{{if .Throttle}}%{{.Throttle}}{{end}}
#SBATCH --nodes=1
#SBATCH --ntasks=1
#SBATCH --cpus-per-task={{.Part.CPUs}}
#SBATCH --mem={{megabytes .Part.Memory}}
#SBATCH --time={{limit .Part.Time}}
#SBATCH --requeue
#SBATCH --signal=B:USR1@120
#SBATCH --chdir={{option .Run}}
#SBATCH --open-mode=append
#SBATCH --output={{option (join .Run "logs")}}/slurm-part-%a.log

set -u
program={{word .Program}}
run={{word .Run}}
most_restarts={{.Restarts}}
options=()

# The program keeps a little below what the task may take.
if [ "${SLURM_MEM_PER_NODE:-0}" -gt 0 ]; then
  options+=(--memory "$((SLURM_MEM_PER_NODE * 95 / 100))M")
fi
{{with .Staging}}
# The table is copied to this node once, for all tasks that run here at the
# same time; the last of them removes the copy.
stage={{place .Folder}}/{{word .Name}}
stage() {
  local whole=yes
  mkdir -p -m 700 "$stage" && [ -O "$stage" ] && exec 8>"$stage/lock" 9>"$stage/use" || return 1
  flock -x 8 || return 1
  if [ ! -e "$stage/whole" ]; then
    rm -rf "$stage/table" &&
      mkdir "$stage/table" &&
      cp --{{range .Files}} {{word .}}{{end}} "$stage/table/" &&
      touch "$stage/whole" || { whole= && rm -rf "$stage/table"; }
  fi
  flock -s 9
  flock -u 8
  [ -n "$whole" ]
}
unstage() {
  flock -x 8
  ! flock -n -x 9 || rm -rf "$stage/whole" "$stage/table"
  flock -u 8
}
if stage; then
  staged=yes
  options+=(--set "table.path=$stage/table"/{{word .Path}})
else
  staged=
  echo "the table cannot be copied to $stage: it is read where it is" >&2
fi
{{end}}
# USR1 comes two minutes before the time limit. The program is asked to write
# what is whole; if it needs longer than there is time for, it is asked again, and
# leaves at once. A TERM of the scheduler's (scancel, preemption) reaches the
# program too, so this shell only waits.
task= near_limit= stopped= signalled=
stop() {
  if [ -n "$task" ] && [ -z "$stopped" ]; then
    stopped=yes
    kill -TERM "$task" 2>/dev/null
  fi
}
trap 'near_limit=yes signalled=yes; stop' USR1
trap 'signalled=yes' TERM

# leave waits for a program that was stopped, and after 90 seconds tells it to
# leave at once.
leave() {
  local left=90
  while kill -0 "$task" 2>/dev/null; do
    [ "$left" -ne 0 ] || kill -TERM "$task" 2>/dev/null
    left=$((left - 1))
    sleep 1
  done
}

"$program" run "$run/study.toml" --out "$run" --part auto "${options[@]}" &
task=$!
[ -z "$near_limit" ] || stop
while :; do
  [ -z "$stopped" ] || leave
  signalled=
  wait "$task"
  code=$?
  [ -n "$signalled" ] || break # a signal ends a wait before the program ends
done
{{if .Staging}}[ -z "$staged" ] || unstage
{{end}}
if [ -n "$near_limit" ] && { [ "$code" -eq 130 ] || [ "$code" -eq 143 ]; }; then
  if [ "${SLURM_RESTART_COUNT:-0}" -lt "$most_restarts" ]; then
    echo "the time limit is near: the task asks to be queued again" >&2
    # Not SLURM_JOB_ID: the last task has that of the array, which would queue
    # all tasks again.
    scontrol requeue "${SLURM_ARRAY_JOB_ID}_$SLURM_ARRAY_TASK_ID"
  else
    echo "the time limit is near, and the task was started $most_restarts times again: holdfast deal submits it once more" >&2
  fi
fi
exit "$code"
