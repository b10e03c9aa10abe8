package main

import (
	"bytes"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"pathtally/properties/report"
	"pathtally/properties/syntax"
)

// printed are the formats, in the order of the help text.
var printed = []string{"text", "lines", "json", "sarif", "html", "markdown"}

// writers print a run in a format.
var writers = map[string]func(io.Writer, *report.Run, report.Options) error{
	"text":     report.Text,
	"lines":    report.Lines,
	"json":     func(w io.Writer, run *report.Run, _ report.Options) error { return report.JSON(w, run) },
	"sarif":    func(w io.Writer, run *report.Run, _ report.Options) error { return report.SARIF(w, run) },
	"html":     func(w io.Writer, run *report.Run, _ report.Options) error { return report.HTML(w, run) },
	"markdown": report.Markdown,
}

// An output is a file that a run writes beside what it prints.
type output struct{ format, file string }

func parseOutputs(args []string) ([]output, error) {
	var out []output
	for _, a := range args {
		format, file, ok := strings.Cut(a, "=")
		if !ok || file == "" {
			return nil, usage("--output %s: write FORMAT=FILE, such as json=result.json", a)
		}
		if !slices.Contains(printed, format) {
			return nil, usage("--output %s: there is no format %s; there are %s", a, format, syntax.Enumerate(printed, "and"))
		}
		if slices.ContainsFunc(out, func(o output) bool { return o.file == file }) {
			return nil, usage("--output %s: two outputs go to %s", a, file)
		}
		out = append(out, output{format, file})
	}
	return out, nil
}

// writeOutputs writes the files, each in one step: a reader sees the old file or
// the new one. Files have no colour and the usual width.
func writeOutputs(outputs []output, run *report.Run, opt report.Options) error {
	opt.Colour, opt.Width = false, 0
	for _, o := range outputs {
		var b bytes.Buffer
		if err := writers[o.format](&b, run, opt); err != nil {
			return &failure{stage: "internal", message: "writing " + o.file + ": " + err.Error()}
		}
		if err := replaceFile(o.file, b.Bytes()); err != nil {
			return &failure{stage: "usage", message: "--output " + o.format + "=" + o.file + ": " + err.Error(), places: []string{filepath.ToSlash(o.file)}}
		}
	}
	return nil
}

// replaceFile writes a file in one step. What is no plain file (a pipe, a
// terminal) is written as it is.
func replaceFile(file string, data []byte) error {
	if info, err := os.Stat(file); err == nil && !info.Mode().IsRegular() {
		return os.WriteFile(file, data, 0o644)
	}
	t, err := os.CreateTemp(filepath.Dir(file), filepath.Base(file)+".*")
	if err != nil {
		return err
	}
	_, err = t.Write(data)
	if e := t.Chmod(0o644); err == nil {
		err = e
	}
	if e := t.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(t.Name(), file)
	}
	if err != nil {
		os.Remove(t.Name())
	}
	return err
}
