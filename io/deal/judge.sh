#!/bin/bash
# Written by holdfast deal. Judges a run when all tasks that make its parts
# have ended, whatever became of them, and writes the tables into the run
# directory. Exit code 3: something is missing or not certified; the log names it.
#
#SBATCH --job-name={{option .Name}}
#SBATCH --nodes=1
#SBATCH --ntasks=1
#SBATCH --cpus-per-task={{.Judge.CPUs}}
#SBATCH --mem={{megabytes .Judge.Memory}}
#SBATCH --time={{limit .Judge.Time}}
#SBATCH --requeue
#SBATCH --chdir={{option .Run}}
#SBATCH --open-mode=append
#SBATCH --output={{option (join .Run "logs")}}/slurm-judge.log

exec {{word .Program}} judge {{word .Run}} --save
