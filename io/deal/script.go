package deal

import (
	"bytes"
	_ "embed"
	"path/filepath"
	"strings"
	"text/template"
)

//go:embed parts.sh
var partsText string

//go:embed judge.sh
var judgeText string

var scripts = template.New("").Funcs(template.FuncMap{
	"word":      word,
	"option":    option,
	"place":     place,
	"indexes":   Indexes,
	"megabytes": megabytes,
	"limit":     limit,
	"join":      filepath.Join,
})

var (
	partsScript = template.Must(template.Must(scripts.Clone()).Parse(partsText))
	judgeScript = template.Must(template.Must(scripts.Clone()).Parse(judgeText))
)

// PartsScript is the batch script of the array that makes some parts.
func (j *Job) PartsScript(parts []int) ([]byte, error) {
	return j.fill(partsScript, parts)
}

// JudgeScript is the batch script of the judging job.
func (j *Job) JudgeScript() ([]byte, error) { return j.fill(judgeScript, nil) }

func (j *Job) fill(t *template.Template, parts []int) ([]byte, error) {
	if err := j.Check(); err != nil {
		return nil, err
	}
	var b bytes.Buffer
	err := t.Execute(&b, struct {
		*Job
		List []int
	}{j, parts})
	return b.Bytes(), err
}

// word quotes text for the shell.
func word(text string) string {
	return "'" + strings.ReplaceAll(text, "'", `'\''`) + "'"
}

// option quotes text for an #SBATCH line, whose reader knows quotes and
// backslashes; a percent sign would begin a pattern in the name of a log.
func option(text string) string {
	text = strings.ReplaceAll(text, "%", "%%")
	if strings.ContainsAny(text, ` \'#`) {
		return `"` + strings.ReplaceAll(text, `\`, `\\`) + `"`
	}
	return text
}

// place quotes a folder on the node for the shell. A variable at its start is
// left for the node to fill in; it must be set there.
func place(folder string) string {
	name, rest, _ := strings.Cut(strings.TrimPrefix(folder, "$"), "/")
	name = strings.TrimSuffix(strings.TrimPrefix(name, "{"), "}")
	if !strings.HasPrefix(folder, "$") || name == "" {
		return word(folder)
	}
	quoted := `"${` + name + `:?is not set on this node}"`
	if rest != "" {
		quoted += word("/" + rest)
	}
	return quoted
}
