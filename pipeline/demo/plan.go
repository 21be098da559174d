package demo

// What an object is.
const (
	galaxy = iota
	quasar
	candidate   // of a very high redshift, by its colours
	star        // of our own Galaxy, taken as a target
	blueshifted // a nearby galaxy that comes toward us
	kinds
)

var kindNames = [kinds]string{"galaxy", "quasar", "candidate", "star", "blueshifted"}

// A slot says what a record will hold: which object, and what is wrong with
// its row.
type slot struct {
	kind   uint8
	deep   bool
	defect uint8
}

// deepShare is the share of "deep" among all objects, quasarShare that of
// quasars in "deep".
const (
	deepShare   = 0.3
	quasarShare = 0.04
)

// plan lays out a survey of rows objects, in random order. Counts scale with
// rows, but there is at least one of each, and the number of broken records
// does not change, since the job's max_rejects does not either.
func plan(rows int, d *dice) []slot {
	slots := make([]slot, 0, rows)
	add := func(n int, s slot) {
		for range n {
			slots = append(slots, s)
		}
	}
	add(scaled(100, rows), slot{kind: star})
	add(scaled(20, rows), slot{kind: blueshifted})
	add(scaled(12, rows), slot{kind: candidate, deep: true})
	deep := int(deepShare * float64(rows)) // of them still to come
	for defect := range defects {
		n := defects[defect].count
		if !defects[defect].broken() {
			n = scaled(n, rows)
		}
		for i := range n {
			slots = append(slots, slot{deep: i%3 == 2, defect: uint8(defect)})
		}
	}
	add(int(quasarShare*deepShare*float64(rows)), slot{kind: quasar, deep: true})
	for _, s := range slots {
		if s.deep {
			deep--
		}
	}
	add(max(0, min(deep, rows-len(slots))), slot{deep: true})
	add(max(0, rows-len(slots)), slot{})
	slots = slots[:min(rows, len(slots))]
	d.shuffle(len(slots), func(i, j int) { slots[i], slots[j] = slots[j], slots[i] })
	return slots
}

// scaled is what n objects of 20 000 are of rows, at least one.
func scaled(n, rows int) int { return max(1, int(float64(n)*float64(rows)/DefaultRows)) }

// A census counts a plan.
type census struct {
	kinds   [kinds]int
	defects []int
	main    int // galaxies of "main", blueshifted ones apart
	deep    int // galaxies of "deep"
}

func count(slots []slot) census {
	c := census{defects: make([]int, len(defects))}
	for _, s := range slots {
		c.kinds[s.kind]++
		c.defects[s.defect]++
		switch {
		case s.kind != galaxy:
		case s.deep:
			c.deep++
		default:
			c.main++
		}
	}
	return c
}
