#!/bin/sh
# An array of {{.Tasks}} tasks with the indices {{.Array}}, for any engine. Put the engine's own
# directives here, and below the variable that holds a task's index; take 1 off if the
# engine counts from 1. Submitted again, a task goes on where it stopped.
task="${TASK_INDEX:?put the variable of your engine here}"
export GOMAXPROCS={{.Cores}}
exec {{.Program}} ensemble run {{.Ensemble}} -o {{.Folder}} --task "$task" --tasks {{.Tasks}} --quiet{{if .Retry}} --retry-failed{{end}}
