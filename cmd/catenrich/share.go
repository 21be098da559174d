package main

import (
	"fmt"
	"io"
	"strconv"
	"strings"
	"text/tabwriter"

	"catenrich/internal/fault"
	"catenrich/pipeline"
)

// maxShares bounds how many shares a job may have.
const maxShares = 100_000

// parseShare reads I/N; both are 0 for no share.
func parseShare(text string) (share, of int, err error) {
	if text == "" {
		return 0, 0, nil
	}
	i, n, _ := strings.Cut(text, "/")
	share, errI := strconv.Atoi(i)
	of, errN := strconv.Atoi(n)
	if errI != nil || errN != nil || of < 1 || of > maxShares || share < 1 || share > of {
		return 0, 0, fault.Usage.Errorf("--share is %q, want I/N, such as 3/8, with 1 ≤ I ≤ N ≤ %d", text, maxShares)
	}
	return share, of, nil
}

// checkShares checks the number of shares that a flag gives; 0 is none.
func checkShares(n int) error {
	if n < 0 || n > maxShares {
		return fault.Usage.Errorf("--shares is %d, want 1 to %d", n, maxShares)
	}
	return nil
}

// shareView is one share as JSON.
type shareView struct {
	Share int      `json:"share"`
	Bytes int64    `json:"bytes"`
	Units []string `json:"units"`
}

func shareViews(p *pipeline.Plan, n int) []shareView {
	var views []shareView
	if n == 0 {
		return nil
	}
	for i, s := range p.Shares(n) {
		v := shareView{Share: i + 1, Bytes: s.Bytes, Units: []string{}}
		for _, u := range s.Units {
			v.Units = append(v.Units, p.Units[u].ID)
		}
		views = append(views, v)
	}
	return views
}

// sharesText says how well n shares are balanced.
func sharesText(w io.Writer, p *pipeline.Plan, n int) error {
	if n == 0 {
		return nil
	}
	shares := p.Shares(n)
	fair := float64(p.Size()) / float64(n)
	most, least, largest := int64(0), shares[0].Bytes, int64(0)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "\nshare\tunits\tinput\tof a fair share\t\n")
	for i, s := range shares {
		fmt.Fprintf(t, "%d/%d\t%d\t%s\t%s\t\n", i+1, n, len(s.Units), bytesText(s.Bytes), percent(float64(s.Bytes), fair))
		most, least = max(most, s.Bytes), min(least, s.Bytes)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for i := range p.Units {
		largest = max(largest, p.Units[i].Size)
	}
	fmt.Fprintf(w, "\nbalance: a fair share is %s; the largest has %s of it, the smallest %s\n",
		bytesText(int64(fair)), percent(float64(most), fair), percent(float64(least), fair))
	if float64(largest) > fair {
		fmt.Fprintf(w, "one unit alone is %s of a fair share: more than %d shares end no sooner\n", percent(float64(largest), fair), p.Size()/largest)
	}
	return nil
}

func percent(part, whole float64) string {
	if whole == 0 {
		return "100 %"
	}
	return fmt.Sprintf("%.1f %%", 100*part/whole)
}
