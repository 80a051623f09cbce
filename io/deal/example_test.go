package deal_test

import (
	"fmt"
	"log"
	"strings"
	"time"

	"holdfast/io/deal"
)

func ExampleJob_PartsScript() {
	job := deal.Job{
		Name: "holdfast-hatchery", Run: "/data/hatchery.run", Program: "/data/hatchery.run/jobs/holdfast", Parts: 4, Throttle: 2,
		Part:  deal.Size{CPUs: 16, Memory: 6 << 30, Time: 3 * time.Hour},
		Judge: deal.Size{CPUs: 1, Memory: 1 << 30, Time: time.Hour},
	}
	script, err := job.PartsScript([]int{1, 3})
	if err != nil {
		log.Fatal(err)
	}
	for line := range strings.Lines(string(script)) {
		if strings.HasPrefix(line, "#SBATCH") {
			fmt.Print(line)
		}
	}
	// Output:
	// #SBATCH --job-name=holdfast-hatchery
	// #SBATCH --array=1,3%2
	// #SBATCH --nodes=1
	// #SBATCH --ntasks=1
	// #SBATCH --cpus-per-task=16
	// #SBATCH --mem=6144M
	// #SBATCH --time=03:00:00
	// #SBATCH --requeue
	// #SBATCH --signal=B:USR1@120
	// #SBATCH --chdir=/data/hatchery.run
	// #SBATCH --open-mode=append
	// #SBATCH --output=/data/hatchery.run/logs/slurm-part-%a.log
}
