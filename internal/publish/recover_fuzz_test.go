package publish_test

import (
	"errors"
	"testing"

	"catenrich/internal/fault"
	. "catenrich/internal/publish"
	"catenrich/internal/publish/faulty"
)

// FuzzRecover: whatever stands in the place of manifests, a publication either
// refuses what is not ours and changes nothing, or ends in the new output; a
// file that is neither output nor sidecar is never touched.
func FuzzRecover(f *testing.F) {
	disk := faulty.New("/d")
	if err := publishText(disk, "text", "rejected"); err != nil {
		f.Fatal(err)
	}
	manifest := disk.Read(ManifestPath(out))
	f.Add("text", "rejected", manifest, "", false)
	f.Add("text", "rejected", "", manifest, false)
	f.Add("text", "rejected", manifest, manifest, true)
	f.Add("other", "", manifest, "{}", true)
	f.Fuzz(func(t *testing.T, output, rejects, manifest, pending string, replace bool) {
		d := faulty.New("/d")
		stood := map[string]string{out: output, outReject: rejects, ManifestPath(out): manifest, PendingPath(out): pending, "/d/victim": "v", "/d/out.csv2": "v"}
		for path, text := range stood {
			if text == "" {
				continue
			}
			file, err := d.Create(path)
			if err != nil {
				t.Fatal(err)
			}
			file.Write([]byte(text))
		}
		err := publishWith(d, Options{Replace: replace}, "new", "new r")
		if d.Read("/d/victim") != "v" || d.Read("/d/out.csv2") != "v" {
			t.Fatal("a file of somebody else was touched")
		}
		if err == nil {
			if s, err := Look(d, out); err != nil || !s.Whole || d.Read(out) != "new" || d.Read(outReject) != "new r" || d.Read(PendingPath(out)) != "-" {
				t.Fatalf("published, and there stands %q, %q, %+v, %v", d.Read(out), d.Read(outReject), s, err)
			}
			return
		}
		if replace || fault.Of(err) != fault.CantCreate {
			t.Fatalf("class %d: %v", fault.Of(err), err)
		}
		if output != "" && d.Read(out) != output {
			t.Fatalf("refused (%v), and the output changed", err)
		}
	})
}

func publishText(d *faulty.Disk, output, rejects string) error {
	return publishWith(d, Options{}, output, rejects)
}

func publishWith(d *faulty.Disk, o Options, output, rejects string) (err error) {
	r, err := Begin(d, out, o)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, r.Abort()) }()
	for suffix, text := range map[string]string{"": output, ".rejects.csv": rejects} {
		w, err := r.Create(suffix)
		if err != nil {
			return err
		}
		if _, err := w.Write([]byte(text)); err != nil {
			return err
		}
	}
	return r.Commit(ManifestOf(output))
}
