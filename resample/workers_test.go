package resample

import (
	"runtime"
	"strings"
	"testing"
	"testing/fstest"
)

// files makes a file system of the given texts.
func files(texts map[string]string) fstest.MapFS {
	root := fstest.MapFS{}
	for name, text := range texts {
		root[name] = &fstest.MapFile{Data: []byte(text)}
	}
	return root
}

// The file formats are those of cgroups(7), proc_pid_mountinfo(5) and the
// kernel's admin guides cgroup-v1 and cgroup-v2 ("cpu.max").
const (
	mountV2 = "35 24 0:30 / /sys/fs/cgroup rw,nosuid shared:9 - cgroup2 cgroup2 rw,nsdelegate\n"
	mountV1 = "36 25 0:31 / /sys/fs/cgroup/cpu,cpuacct rw shared:15 - cgroup cgroup rw,cpu,cpuacct\n" +
		"37 25 0:32 / /sys/fs/cgroup/cpuset rw shared:16 - cgroup cgroup rw,cpuset\n"
	mountV1Part = "36 25 0:31 /pod/abc /sys/fs/cgroup/cpu,cpuacct ro - cgroup cgroup rw,cpu,cpuacct\n"
	noise       = "24 1 0:23 / / rw - ext4 root rw\nbroken line\n"
)

func TestCgroupQuota(t *testing.T) {
	for name, c := range map[string]struct {
		files map[string]string
		want  int // 0: none
	}{
		"version 2": {map[string]string{
			cgroupFile:                         "0::/slurm/job7\n",
			mountsFile:                         noise + mountV2,
			"sys/fs/cgroup/slurm/job7/cpu.max": "300000 100000\n",
		}, 3},
		"version 2, a part of a processor": {map[string]string{
			cgroupFile:                  "0::/job\n",
			mountsFile:                  mountV2,
			"sys/fs/cgroup/job/cpu.max": "250000 100000\n",
		}, 3},
		"version 2, less than one": {map[string]string{
			cgroupFile:              "0::/\n",
			mountsFile:              mountV2,
			"sys/fs/cgroup/cpu.max": "20000 100000\n",
		}, 1},
		"version 2, the group above is tighter": {map[string]string{
			cgroupFile:                         "0::/slurm/job7\n",
			mountsFile:                         mountV2,
			"sys/fs/cgroup/slurm/job7/cpu.max": "max 100000\n",
			"sys/fs/cgroup/slurm/cpu.max":      "200000 100000\n",
		}, 2},
		"version 2, none set": {map[string]string{
			cgroupFile:                  "0::/job\n",
			mountsFile:                  mountV2,
			"sys/fs/cgroup/job/cpu.max": "max 100000\n",
		}, 0},
		"version 1": {map[string]string{
			cgroupFile: "12:cpuset:/other\n4:cpu,cpuacct:/job\n",
			mountsFile: noise + mountV1,
			"sys/fs/cgroup/cpu,cpuacct/job/cpu.cfs_quota_us":  "400000\n",
			"sys/fs/cgroup/cpu,cpuacct/job/cpu.cfs_period_us": "100000\n",
		}, 4},
		"version 1, none set": {map[string]string{
			cgroupFile: "4:cpu,cpuacct:/job\n",
			mountsFile: mountV1,
			"sys/fs/cgroup/cpu,cpuacct/job/cpu.cfs_quota_us":  "-1\n",
			"sys/fs/cgroup/cpu,cpuacct/job/cpu.cfs_period_us": "100000\n",
		}, 0},
		"version 1 in a container that sees its own part": {map[string]string{
			cgroupFile: "4:cpu,cpuacct:/pod/abc\n0::/pod/abc\n",
			mountsFile: mountV1Part,
			"sys/fs/cgroup/cpu,cpuacct/cpu.cfs_quota_us":  "150000\n",
			"sys/fs/cgroup/cpu,cpuacct/cpu.cfs_period_us": "100000\n",
		}, 2},
		"both versions, the smaller": {map[string]string{
			cgroupFile:                  "4:cpu,cpuacct:/job\n0::/job\n",
			mountsFile:                  mountV1 + mountV2,
			"sys/fs/cgroup/job/cpu.max": "500000 100000\n",
			"sys/fs/cgroup/cpu,cpuacct/job/cpu.cfs_quota_us":  "600000\n",
			"sys/fs/cgroup/cpu,cpuacct/job/cpu.cfs_period_us": "100000\n",
		}, 5},
		"damaged": {map[string]string{
			cgroupFile:                  "0::/job\nnonsense\n",
			mountsFile:                  mountV2,
			"sys/fs/cgroup/job/cpu.max": "many\n",
		}, 0},
		"no control groups": {map[string]string{}, 0},
		"no mounts":         {map[string]string{cgroupFile: "0::/job\n"}, 0},
	} {
		limit, ok := cgroupQuota(files(c.files))
		if ok != (c.want > 0) || limit.CPUs != c.want {
			t.Errorf("%s: %d, %v; want %d", name, limit.CPUs, ok, c.want)
		}
	}
}

func TestGroupBelowAMount(t *testing.T) {
	for _, c := range [][3]string{
		{"/", "/a/b", "/a/b"},
		{"/a", "/a/b", "/b"},
		{"/a", "/a", ""},
		{"/a", "/ab", "/"}, // another group that starts alike
		{"/a", "/c", "/"},
	} {
		if got := within(c[0], c[1]); got != c[2] {
			t.Errorf("%s below %s: %q, want %q", c[1], c[0], got, c[2])
		}
	}
}

func TestSchedulerVariable(t *testing.T) {
	t.Setenv(schedulerVariable, "1")
	if n := Workers(); n != 1 {
		t.Errorf("%d workers where the scheduler gives 1", n)
	}
	for _, bad := range []string{"", "none", "0", "-2", "2(x3)"} {
		l := schedulerLimit(bad)
		if l.CPUs != 0 || !strings.Contains(l.Why, "not a number of processors") {
			t.Errorf("%q: %+v", bad, l)
		}
	}
}

// The go runtime reads the affinity mask by itself when it starts; another
// way to the same number.
func TestWorkersWithinProcessors(t *testing.T) {
	t.Setenv(schedulerVariable, "1000000")
	if n := Workers(); n < 1 || n > runtime.NumCPU() {
		t.Errorf("%d workers on %d processors", n, runtime.NumCPU())
	}
	for _, l := range CPULimits() {
		if l.Source == "" || (l.CPUs > 0) == (l.Why != "") {
			t.Errorf("limit %+v", l)
		}
	}
}

func TestSmallestLimit(t *testing.T) {
	for _, c := range []struct {
		limits []CPULimit
		want   int
	}{
		{nil, 1},
		{[]CPULimit{{CPUs: 8}, {CPUs: 3}, {CPUs: 5}}, 3},
		{[]CPULimit{{CPUs: 8}, {Why: "could not be read"}}, 8},
	} {
		if got := smallest(c.limits); got != c.want {
			t.Errorf("%v: %d, want %d", c.limits, got, c.want)
		}
	}
}
