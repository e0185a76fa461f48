#!/bin/bash
#SBATCH --job-name={{.Name}}-gather
#SBATCH --ntasks=1
#SBATCH --output={{.Log}}/gather_%j.txt
{{- range .Options}}
#SBATCH {{.}}
{{- end}}
# After the array, whatever became of its tasks: it tells what is missing.
exec {{.Program}} ensemble gather {{.Folder}}
