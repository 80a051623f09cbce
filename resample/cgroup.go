package resample

import (
	"fmt"
	"io/fs"
	"math"
	"path"
	"strconv"
	"strings"
)

// Where the kernel says which control group this process is in and where
// the control file systems are mounted, relative to the root.
const (
	cgroupFile = "proc/self/cgroup"
	mountsFile = "proc/self/mountinfo"
)

// cgroupQuota returns the processor quota of this process's control group,
// the least of the group and those above it, rounded up. ok is false where
// none is set. The formats are those of the manual pages cgroups(7) and
// proc_pid_mountinfo(5) and of the kernel's cgroup-v2 page.
func cgroupQuota(root fs.FS) (limit CPULimit, ok bool) {
	groups, err := fs.ReadFile(root, cgroupFile)
	if err != nil {
		return CPULimit{}, false // no control groups here
	}
	mounts, err := fs.ReadFile(root, mountsFile)
	if err != nil {
		return CPULimit{}, false
	}
	least := math.Inf(1)
	for _, h := range hierarchies(string(groups), string(mounts)) {
		least = min(least, h.quota(root))
	}
	if math.IsInf(least, 1) {
		return CPULimit{}, false
	}
	return CPULimit{Source: "cgroup quota", CPUs: max(1, int(math.Ceil(least)))}, true
}

// hierarchy is one mounted tree of control groups that may hold a quota.
type hierarchy struct {
	unified bool   // version 2
	mount   string // where it is mounted, relative to the root
	group   string // this process's group, relative to the mount
}

// hierarchies joins the groups of this process with the mounts.
func hierarchies(groups, mounts string) []hierarchy {
	var out []hierarchy
	for line := range strings.Lines(groups) {
		// hierarchy-ID:controller-list:path
		parts := strings.SplitN(strings.TrimSuffix(line, "\n"), ":", 3)
		if len(parts) != 3 {
			continue
		}
		unified := parts[0] == "0" && parts[1] == ""
		if !unified && !lists(parts[1], "cpu") {
			continue
		}
		for _, m := range cgroupMounts(mounts, unified) {
			out = append(out, hierarchy{unified, strings.TrimPrefix(m.point, "/"), within(m.root, parts[2])})
		}
	}
	return out
}

// cgroupMount is a mount of a control file system: which part of it, where.
type cgroupMount struct{ root, point string }

// cgroupMounts finds the mounts of version 2, or of version 1's cpu tree.
func cgroupMounts(mounts string, unified bool) []cgroupMount {
	var out []cgroupMount
	for line := range strings.Lines(mounts) {
		// id parent major:minor root point options [optional...] - type source superoptions
		head, tail, found := strings.Cut(line, " - ")
		left, right := strings.Fields(head), strings.Fields(tail)
		if !found || len(left) < 5 || len(right) < 3 {
			continue
		}
		if unified && right[0] == "cgroup2" || !unified && right[0] == "cgroup" && lists(right[2], "cpu") {
			out = append(out, cgroupMount{left[3], left[4]})
		}
	}
	return out
}

// lists reports whether a comma-separated list holds a word.
func lists(list, word string) bool {
	for w := range strings.SplitSeq(list, ",") {
		if w == word {
			return true
		}
	}
	return false
}

// within returns a group's path below a mount that shows the tree from root
// on. Inside a container the mount often is the group itself.
func within(root, group string) string {
	if root == "/" {
		return group
	}
	if rest, ok := strings.CutPrefix(group, root); ok && (rest == "" || rest[0] == '/') {
		return rest
	}
	return "/"
}

// quota is the least quota from the group up to the mount, in processors;
// infinite where none is set.
func (h hierarchy) quota(root fs.FS) float64 {
	least := math.Inf(1)
	for group := path.Clean("/" + h.group); ; group = path.Dir(group) {
		least = min(least, h.quotaAt(root, path.Join(h.mount, group)))
		if group == "/" {
			return least
		}
	}
}

// quotaAt reads the quota of one group.
func (h hierarchy) quotaAt(root fs.FS, dir string) float64 {
	if h.unified {
		text, err := fs.ReadFile(root, path.Join(dir, "cpu.max"))
		if err != nil {
			return math.Inf(1) // the root group has no such file
		}
		var quota, period string
		if n, _ := fmt.Sscan(string(text), &quota, &period); n != 2 {
			return math.Inf(1)
		}
		return share(quota, period)
	}
	quota, err := fs.ReadFile(root, path.Join(dir, "cpu.cfs_quota_us"))
	if err != nil {
		return math.Inf(1)
	}
	period, err := fs.ReadFile(root, path.Join(dir, "cpu.cfs_period_us"))
	if err != nil {
		return math.Inf(1)
	}
	return share(strings.TrimSpace(string(quota)), strings.TrimSpace(string(period)))
}

// share is quota/period; "max" (version 2) and -1 (version 1) set no limit.
func share(quota, period string) float64 {
	q, errQ := strconv.ParseFloat(quota, 64)
	p, errP := strconv.ParseFloat(period, 64)
	if errQ != nil || errP != nil || !(q > 0) || !(p > 0) {
		return math.Inf(1)
	}
	return q / p
}
