package main

import (
	"io"
	"strings"

	"catenrich/internal/table"
	"catenrich/pipeline"
	"catenrich/pipeline/job"
	"catenrich/readers"
	"catenrich/writers"
)

// formats pairs the readers with the writers: the one place that knows all
// file formats.
func formats() pipeline.Formats {
	return pipeline.Formats{
		{
			Name:     "csv",
			Suffixes: []string{".csv", ".tsv", ".txt", ".dat", ".csv.gz", ".tsv.gz", ".txt.gz", ".dat.gz", ".csv.zst", ".tsv.zst", ".txt.zst", ".dat.zst"},
			Open: func(path string, in *job.InputSettings) (table.Source, error) {
				return readers.OpenCSV(path, dialect(path, in))
			},
			Stream: func(name string, r io.ReadCloser, in *job.InputSettings) (table.Source, error) {
				return readers.NewCSV(name, r, dialect(name, in))
			},
			Sinks: map[string]func(table.Source, string, table.Spec) (table.Sink, error){
				"csv": func(src table.Source, path string, spec table.Spec) (table.Sink, error) {
					spec.Codec = textCodec(path)
					return writers.NewCSV(src.(*readers.CSV), spec), nil
				},
			},
		},
		{
			Name:           "parquet",
			SelfDescribing: true,
			Suffixes:       []string{".parquet", ".pq", ".parq"},
			Open: func(path string, _ *job.InputSettings) (table.Source, error) {
				return readers.OpenParquet(path)
			},
			Sinks: map[string]func(table.Source, string, table.Spec) (table.Sink, error){
				"parquet": func(src table.Source, _ string, spec table.Spec) (table.Sink, error) {
					return writers.NewParquet(src.(*readers.Parquet), spec)
				},
			},
		},
		{
			Name:           "fits",
			SelfDescribing: true,
			Suffixes:       []string{".fits", ".fit", ".fits.gz"},
			Open: func(path string, in *job.InputSettings) (table.Source, error) {
				return readers.OpenFITS(path, readers.FITSOptions{HDU: in.HDU})
			},
			Sinks: map[string]func(table.Source, string, table.Spec) (table.Sink, error){
				"fits": func(src table.Source, path string, spec table.Spec) (table.Sink, error) {
					spec.Codec = textCodec(path)
					return writers.NewFITS(src.(*readers.FITS), spec)
				},
			},
		},
	}
}

// dialect turns the settings of a job into the reader's; the suffix decides
// what the job leaves open.
func dialect(path string, in *job.InputSettings) readers.CSVOptions {
	o := readers.CSVOptions{Delimiter: ',', NoQuote: in.Quote == "none", Comment: in.Comment}
	if len(in.Names) > 0 {
		o.Names = in.Names
	}
	plain := strings.TrimSuffix(strings.TrimSuffix(strings.ToLower(path), ".gz"), ".zst")
	if strings.HasSuffix(plain, ".tsv") {
		o.Delimiter = '\t'
	}
	if in.Delimiter != "" {
		o.Delimiter = in.Delimiter[0]
	}
	if in.HeaderDelimiter != "" {
		o.HeaderDelimiter = in.HeaderDelimiter[0]
	}
	switch in.Header {
	case "none":
		o.Header = readers.HeaderNone
	case "commented":
		o.Header = readers.HeaderCommented
	}
	return o
}

// textCodec is the compression that a path's suffix asks for.
func textCodec(path string) string {
	switch lower := strings.ToLower(path); {
	case strings.HasSuffix(lower, ".gz"):
		return "gzip"
	case strings.HasSuffix(lower, ".zst"):
		return "zst"
	}
	return ""
}
