package main

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"reflect"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"catenrich/cosmo"
	"catenrich/internal/status"
)

const docsDir = "../../docs"

// TestDocsReference holds docs/reference to the tables in the code that it is
// made from; `go test ./cmd/... -update` writes it again.
func TestDocsReference(t *testing.T) {
	for name, text := range map[string]string{"columns.md": columnsPage(t), "job-file.md": jobPage(t), "commands.md": commandsPage()} {
		path := docsDir + "/reference/" + name
		if *update {
			writeFile(t, path, text)
		} else if string(readFile(t, path)) != text {
			t.Errorf("%s is not what the code says: run go test ./cmd/... -update", path)
		}
	}
}

const generated = "<!-- Made from tables in the code by `go test ./cmd/... -update`; do not edit. -->\n\n"

// columnsPage is the table of columns, the status bits and the named sets.
func columnsPage(t *testing.T) string {
	var b strings.Builder
	b.WriteString("# Columns, status bits, cosmologies\n\n" + generated)
	b.WriteString("## Columns\n\nNames and groups go into `add.columns` or `--add`. In the fourth column, e says that `<name>_error` can be added, i that\n`<name>_lo` and `<name>_hi` can. Units are VOUnits, here with lengths in Mpc.\n\n")
	b.WriteString(mustRun(t, "columns", "--markdown").stdout)
	b.WriteString("\n## UCDs\n\nThe words are those of the UCD list 1.6. An error begins with `stat.error`.\n\n| column | UCD |\n|---|---|\n")
	for _, r := range columnRows("") {
		fmt.Fprintf(&b, "| `%s` | `%s` |\n", r.Name, r.UCD)
	}
	b.WriteString("\n## Bits of enrich_status\n\nThe status of a row is the sum of its bits. What to do about each: [the status bits](../how-to/status-bits.md).\n\n| bit | meaning |\n|---|---|\n")
	for i := range status.Count {
		fmt.Fprintf(&b, "| %d | %s |\n", 1<<i, status.Describe(i))
	}
	b.WriteString("\n## Named cosmologies\n\n| set | H0 | omega_m | CMB, K | N_eff | neutrino masses, eV | source | |\n|---|---|---|---|---|---|---|---|\n")
	for _, p := range cosmo.Presets() {
		fmt.Fprintf(&b, "| `%s` | %g | %g | %g | %g | %s | %s | %s |\n", p.Name, p.Params.H0, p.Params.OmegaM, p.Params.TCMB, p.Params.Neff,
			strings.Trim(fmt.Sprint(p.Params.NeutrinoMasses), "[]"), p.Source, p.Doc)
	}
	return b.String()
}

// commandsPage lists commands, flags and exit codes.
func commandsPage() string {
	var b strings.Builder
	b.WriteString("# Commands, flags, exit codes\n\n" + generated)
	for _, c := range commands() {
		if c.Hidden {
			continue
		}
		about := c.Long
		if about == "" {
			about = c.Short + "."
		}
		fmt.Fprintf(&b, "## %s\n\n%s\n\n    %s\n\n", c.CommandPath(), about, c.UseLine())
		flags := flagRows(c)
		if flags != "" {
			b.WriteString("| flag | what it does | job file |\n|---|---|---|\n" + flags + "\n")
		}
		fmt.Fprintf(&b, "Examples:\n\n```text\n%s\n```\n\n", dedent(c.Example))
	}
	b.WriteString("Every command has `--help` and `--log-format`. `catenrich completion bash|zsh|fish` prints a script for the shell;\n`catenrich man DIR` writes manual pages.\n\n")
	b.WriteString("## Exit codes\n\nThey are those of sysexits(3).\n\n| code | what happened | what to do |\n|---|---|---|\n")
	for _, e := range exitCodes {
		fmt.Fprintf(&b, "| %s | %s | %s |\n", e.Code, e.Meaning, e.Remedy)
	}
	return b.String()
}

// flagRows is a row for each flag of a command, with the key that it stands
// for.
func flagRows(c *cobra.Command) string {
	var b strings.Builder
	c.LocalFlags().VisitAll(func(f *pflag.Flag) {
		if f.Name == "help" || f.Hidden {
			return
		}
		value, usage := pflag.UnquoteUsage(f)
		name := "--" + f.Name
		if f.Shorthand != "" {
			name = "-" + f.Shorthand + ", " + name
		}
		if value != "" {
			name += " " + value
		}
		key := ""
		if s, ok := f.Value.(*flagValue); ok {
			key = "`" + shownPath(s.setting.path) + "`"
		}
		fmt.Fprintf(&b, "| `%s` | %s | %s |\n", cell(name), cell(usage), key)
	})
	return b.String()
}

// cell escapes what would end a cell of a table.
func cell(s string) string { return strings.NewReplacer("|", `\|`, "<", "&lt;").Replace(s) }

// shownPath is a key path as the documentation writes it.
func shownPath(path string) string { return strings.ReplaceAll(path, "[0]", "") }

func dedent(s string) string {
	return strings.TrimPrefix(strings.ReplaceAll(s, "\n  ", "\n"), "  ")
}

// jobPage lists the keys of the job file with the comments of their fields.
func jobPage(t *testing.T) string {
	var b strings.Builder
	b.WriteString("# The job file\n\n" + generated)
	b.WriteString("TOML. Unknown keys are errors, with their line. Tables in double brackets may be repeated. Paths are relative to the job\nfile. `catenrich run … --save-job FILE` writes the job that a command line amounts to.\n\n")
	flags := make(map[string]string)
	for i := range settings {
		flags[shownPath(settings[i].path)] = "`--" + settings[i].flag + "`"
	}
	structs := jobStructs(t)
	root := structs["File"]
	b.WriteString("| key | value | meaning | flag |\n|---|---|---|---|\n")
	fmt.Fprintf(&b, "| `title` | text | %s | |\n", root.fields[0].doc)
	jobTables(t, &b, structs, flags, "File", "")
	return b.String()
}

// jobTables writes the tables below one table of the job file.
func jobTables(t *testing.T, b *strings.Builder, structs map[string]jobStruct, flags map[string]string, name, path string) {
	for _, f := range structs[name].fields {
		inner := strings.TrimLeft(f.typ, "[]*")
		s, ok := structs[inner]
		if !ok {
			continue
		}
		key := strings.TrimPrefix(path+"."+f.key, ".")
		if inner == "KCorrection" && name != "Band" {
			continue // described once
		}
		brackets := "[" + key + "]"
		if strings.HasPrefix(f.typ, "[]") {
			brackets = "[" + brackets + "]"
		}
		fmt.Fprintf(b, "\n## %s\n\n%s\n\n| key | value | meaning | flag |\n|---|---|---|---|\n", brackets, s.doc)
		for _, k := range s.fields {
			flag := flags[key+"."+k.key]
			kind := kindOf(t, k.typ, structs)
			if kind == "table" && k.doc == "" {
				k.doc = "see [" + key + "." + k.key + "]"
			}
			if k.key == "header" {
				kind = "true, false or text"
			}
			if len(k.doc) < 3 {
				t.Errorf("%s.%s has no meaning in pipeline/job/file.go", key, k.key)
			}
			fmt.Fprintf(b, "| `%s` | %s | %s | %s |\n", k.key, kind, cell(k.doc), flag)
		}
		jobTables(t, b, structs, flags, inner, key)
	}
}

// kindOf says what values a key takes.
func kindOf(t *testing.T, typ string, structs map[string]jobStruct) string {
	switch typ {
	case "string":
		return "text"
	case "[]string":
		return "list of texts"
	case "float64", "*float64":
		return "number"
	case "int", "int64":
		return "whole number"
	case "[]float64":
		return "list of numbers"
	case "any":
		return "number or text"
	case "[]any":
		return "list of numbers or texts"
	case "map[string]float64":
		return "table of numbers"
	}
	if _, ok := structs[strings.TrimLeft(typ, "[]*")]; ok {
		return "table"
	}
	t.Errorf("a key of type %s", typ)
	return ""
}

// A jobStruct is a table of the job file.
type jobStruct struct {
	doc    string
	fields []jobField
}

type jobField struct{ key, typ, doc string }

// jobStructs reads the source of the job file's structs: it is their comments
// that say what the keys mean.
func jobStructs(t *testing.T) map[string]jobStruct {
	t.Helper()
	file, err := parser.ParseFile(token.NewFileSet(), "../../pipeline/job/file.go", nil, parser.ParseComments)
	if err != nil {
		t.Fatal(err)
	}
	all := make(map[string]jobStruct)
	for _, d := range file.Decls {
		g, ok := d.(*ast.GenDecl)
		if !ok || g.Tok != token.TYPE {
			continue
		}
		spec := g.Specs[0].(*ast.TypeSpec)
		body, ok := spec.Type.(*ast.StructType)
		if !ok {
			continue
		}
		s := jobStruct{doc: goneInto(g.Doc.Text(), spec.Name.Name)}
		for _, f := range body.Fields.List {
			if f.Tag == nil {
				continue
			}
			key, _, _ := strings.Cut(reflect.StructTag(strings.Trim(f.Tag.Value, "`")).Get("toml"), ",")
			if key == "-" {
				continue
			}
			s.fields = append(s.fields, jobField{key, typeText(f.Type), strings.TrimSpace(f.Comment.Text())})
		}
		all[spec.Name.Name] = s
	}
	return all
}

// goneInto is a doc comment without the Go name it begins with.
func goneInto(doc, name string) string {
	doc = strings.Join(strings.Fields(doc), " ")
	doc = strings.TrimPrefix(doc, name+" ")
	for _, verb := range []string{"says ", "is "} {
		if rest, ok := strings.CutPrefix(doc, verb); ok {
			doc = rest
			break
		}
	}
	return strings.ToUpper(doc[:1]) + doc[1:]
}

func typeText(e ast.Expr) string {
	switch e := e.(type) {
	case *ast.Ident:
		return e.Name
	case *ast.StarExpr:
		return "*" + typeText(e.X)
	case *ast.ArrayType:
		return "[]" + typeText(e.Elt)
	case *ast.MapType:
		return "map[" + typeText(e.Key) + "]" + typeText(e.Value)
	}
	return "?"
}

// TestStatusPage: the page about the status bits has a row for each, in the
// words of the code.
func TestStatusPage(t *testing.T) {
	page := string(readFile(t, docsDir+"/how-to/status-bits.md"))
	rows := regexp.MustCompile(`(?m)^\| ([0-9]+) \| ([^|]+) \| ([^|]+) \|$`).FindAllStringSubmatch(page, -1)
	if len(rows) != status.Count {
		t.Errorf("%d rows for %d bits", len(rows), status.Count)
	}
	for i := range status.Count {
		bit := fmt.Sprint(1 << i)
		at := slices.IndexFunc(rows, func(r []string) bool { return r[1] == bit })
		if at < 0 || rows[at][2] != status.Describe(i) {
			t.Errorf("bit %s, %q, is not on the page", bit, status.Describe(i))
		}
	}
}
