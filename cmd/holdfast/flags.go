package main

import (
	"encoding/json"
	"fmt"
	"strconv"
	"strings"
)

// optional is a number on the command line that may be left out.
type optional struct{ value *float64 }

func (o *optional) Set(text string) error {
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return fmt.Errorf("%q is not a number", text)
	}
	o.value = &x
	return nil
}

func (o *optional) Type() string { return "number" }

func (o *optional) String() string {
	if o.value == nil {
		return ""
	}
	return strconv.FormatFloat(*o.value, 'g', -1, 64)
}

// numbers is a comma-separated list of numbers on the command line.
type numbers []float64

func (n *numbers) Set(text string) error {
	var one optional
	for _, word := range strings.Split(text, ",") {
		if err := one.Set(strings.TrimSpace(word)); err != nil {
			return err
		}
		*n = append(*n, *one.value)
	}
	return nil
}

func (n *numbers) Type() string   { return "numbers" }
func (n *numbers) String() string { return "" }

// writeJSON prints v as one indented JSON document.
func (p *program) writeJSON(v any) error {
	enc := json.NewEncoder(p.out)
	enc.SetIndent("", "  ")
	enc.SetEscapeHTML(false)
	return enc.Encode(v)
}
