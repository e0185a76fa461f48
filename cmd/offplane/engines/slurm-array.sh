#!/bin/bash
#SBATCH --job-name={{.Name}}
#SBATCH --array={{.Array}}{{if .AtOnce}}%{{.AtOnce}}{{end}}
#SBATCH --ntasks=1
#SBATCH --cpus-per-task={{.Cores}}
{{- if .Memory}}
#SBATCH --mem={{.Memory}}
{{- end}}
{{- if .Time}}
#SBATCH --time={{.Time}}
{{- end}}
#SBATCH --output={{.Log}}/%A_%a.txt
{{- range .Options}}
#SBATCH {{.}}
{{- end}}
# {{.Members}} members in {{.Tasks}} tasks. Submitted again, a task goes on where it stopped.
export GOMAXPROCS="${SLURM_CPUS_PER_TASK:-1}"
if [ "${SLURM_MEM_PER_NODE:-0}" -gt 0 ]; then export GOMEMLIMIT="$((SLURM_MEM_PER_NODE * 9 / 10))MiB"; fi
exec {{.Program}} ensemble run {{.Ensemble}} -o {{.Folder}} --task "$SLURM_ARRAY_TASK_ID" --tasks {{.Tasks}} --quiet{{if .Retry}} --retry-failed{{end}}
