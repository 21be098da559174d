package main

import (
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"catenrich/cosmo"
	"catenrich/pipeline"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// choices are the values of flags that take one of a few; TestChoices holds
// them to what the job accepts.
var choices = map[string][]string{
	"velocity-convention": {"optical", "radio", "relativistic"},
	"velocity-unit":       {"km/s", "m/s"},
	"negative":            {"null", "signed"},
	"frame":               {"as-given", "heliocentric", "barycentric", "cmb", "local-group"},
	"distances-in":        {"as-given", "cmb", "local-group"},
	"limits-on":           {"corrected", "observed"},
	"length-unit":         {"Mpc", "Gpc", "Glyr", "Mpc/h"},
	"format":              job.Formats,
	"output-format":       job.Formats,
	"header":              {"true", "false", "commented"},
	"float":               {"64", "32"},
	"encoding":            {"byte_stream_split", "plain"},
	"codec":               {"zstd", "snappy", "none"},
	"log-format":          {logText, logJSON},
	"check":               {"quick", "full"},
}

// registerCompletions tells the shell what may follow a flag.
func (a *app) registerCompletions(root *cobra.Command) {
	for _, c := range append([]*cobra.Command{root}, root.Commands()...) {
		suggest := func(flag string, f cobra.CompletionFunc) {
			if c.LocalFlags().Lookup(flag) == nil {
				return
			}
			if err := c.RegisterFlagCompletionFunc(flag, f); err != nil {
				panic("catenrich: --" + flag + ": " + err.Error()) // registered twice
			}
		}
		for flag, values := range choices {
			suggest(flag, cobra.FixedCompletions(values, cobra.ShellCompDirectiveNoFileComp))
		}
		suggest("set", cobra.FixedCompletions(sets(), cobra.ShellCompDirectiveNoFileComp))
		suggest("add", completeAdd)
		for i := range settings {
			if settings[i].value == "COLUMN" {
				suggest(settings[i].flag, completeCatalogue)
			}
		}
	}
}

// completeAdd suggests groups and columns, behind those that are already in
// the list.
func completeAdd(c *cobra.Command, _ []string, typed string) ([]string, cobra.ShellCompDirective) {
	list, last := "", typed
	if at := strings.LastIndexByte(typed, ','); at >= 0 {
		list, last = typed[:at+1], typed[at+1:]
	}
	had := strings.Split(list, ",")
	var all []string
	for _, s := range addable(c) {
		name, _, _ := strings.Cut(s, "\t")
		if strings.HasPrefix(name, last) && !slices.Contains(had, name) {
			all = append(all, list+s)
		}
	}
	return all, cobra.ShellCompDirectiveNoFileComp | cobra.ShellCompDirectiveNoSpace
}

// addable lists what --add may name, each with its meaning behind a tab. A
// command line can describe one band and one selection.
func addable(c *cobra.Command) []string {
	members := map[columns.Family]string{columns.Single: "", columns.PerBand: "_m", columns.PerSelection: "_main"}
	if f, ok := c.Flags().Lookup("band").Value.(*flagValue); ok {
		for _, g := range f.flags.given {
			if g.setting == f.setting {
				members[columns.PerBand] = "_" + g.value
			}
		}
	}
	var all []string
	for _, g := range columns.Groups() {
		all = append(all, g+"\tgroup")
	}
	for _, e := range columns.All() {
		member, ok := members[e.Family]
		if !ok {
			continue
		}
		all = append(all, e.Name+member+"\t"+e.Doc)
		if e.Spread.Error != nil {
			all = append(all, e.Name+member+"_error\terror of "+e.Name)
		}
		if e.Spread.Interval {
			all = append(all, e.Name+member+"_lo\tlower end of "+e.Name, e.Name+member+"_hi\tupper end of "+e.Name)
		}
	}
	return all
}

// completeCatalogue suggests the columns of the first catalogue that the
// command line names.
func completeCatalogue(c *cobra.Command, args []string, typed string) ([]string, cobra.ShellCompDirective) {
	var given jobFlags
	if f, ok := c.Flags().Lookup("redshift").Value.(*flagValue); ok {
		given = *f.flags
	}
	if len(args) == 0 || args[0] == pipeline.Standard || strings.HasSuffix(args[0], ".toml") {
		return nil, cobra.ShellCompDirectiveNoFileComp
	}
	names, err := columnsOf(&given, args[0])
	if err != nil {
		return nil, cobra.ShellCompDirectiveNoFileComp // the run will say what is wrong
	}
	names = slices.DeleteFunc(names, func(n string) bool { return !strings.HasPrefix(n, typed) })
	return names, cobra.ShellCompDirectiveNoFileComp
}

// columnsOf reads the names of a catalogue's columns, by the dialect that the
// flags so far give.
func columnsOf(given *jobFlags, path string) ([]string, error) {
	f := &job.File{Input: job.Input{Files: []string{path}}}
	if err := given.apply(f); err != nil {
		return nil, err
	}
	in := f.InputSettings()
	format, err := formats().Find(in.Format, path)
	if err != nil {
		return nil, err
	}
	src, err := format.Open(path, &in)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	return src.Schema().Names(), nil
}

// sets are the named cosmologies, each with its source behind a tab.
func sets() []string {
	var all []string
	for _, p := range cosmo.Presets() {
		all = append(all, p.Name+"\t"+p.Source)
	}
	return all
}
