package main

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"text/tabwriter"

	"rhotrace/experiment"
	"rhotrace/io/quantity"
	"rhotrace/io/table"
)

// summarise tells a person what a table holds and where it was saved.
func summarise(w *bufio.Writer, e *experiment.Experiment, t *table.Table, saved []string) error {
	if title := e.Title(); title != "" {
		fmt.Fprintf(w, "%s\n", oneLine(title))
	}
	asked, answers := split(e, t)
	fmt.Fprintf(w, "%s", count(t.Rows(), "row"))
	for i, c := range asked {
		low, high, _, _ := extremes(c.Values)
		between := ", over"
		if i > 0 {
			between = " and"
		}
		fmt.Fprintf(w, "%s %s from %s to %s", between, c.Name, show(e, c, low, 5), show(e, c, high, 5))
	}
	fmt.Fprint(w, "\n\n")
	if t.Rows() == 1 {
		values(w, e, answers)
	} else {
		ranges(w, e, asked, answers)
	}
	if len(saved) > 0 {
		fmt.Fprintf(w, "\nwritten: %s\n", list(saved))
	} else {
		fmt.Fprint(w, "\nnothing was saved; -o out.arrow or -o out.csv saves the table, --figure out.png draws it\n")
	}
	return nil
}

// split parts the columns into what was asked (scanned dials, time) and what a
// run answers, which begins with the population of the first level.
func split(e *experiment.Experiment, t *table.Table) (asked, answers []table.Column) {
	first := "population." + e.Levels()[0]
	for i, c := range t.Columns {
		if c.Name == first {
			return t.Columns[:i], t.Columns[i:]
		}
	}
	return t.Columns, nil
}

// values lists the columns of a table with one row.
func values(w io.Writer, e *experiment.Experiment, answers []table.Column) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprint(t, "column\tvalue\tmeaning\n")
	for _, c := range answers {
		fmt.Fprintf(t, "%s\t%s\t%s\n", c.Name, show(e, c, c.Values[0], 6), c.About)
	}
	t.Flush()
}

// ranges lists where each column is smallest and largest.
func ranges(w io.Writer, e *experiment.Experiment, asked, answers []table.Column) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprint(t, "column\tsmallest\tat\tlargest\tat\n")
	at := func(row int) string {
		var places []string
		for _, c := range asked {
			places = append(places, show(e, c, c.Values[row], 5))
		}
		return list(places)
	}
	for _, c := range answers {
		low, high, lowest, highest := extremes(c.Values)
		if lowest < 0 {
			fmt.Fprintf(t, "%s\tno value\n", c.Name)
			continue
		}
		if low == high {
			fmt.Fprintf(t, "%s\t%s\teverywhere\n", c.Name, show(e, c, low, 4))
			continue
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\n", c.Name, show(e, c, low, 4), at(lowest), show(e, c, high, 4), at(highest))
	}
	t.Flush()
}

// extremes finds the smallest and the largest number and the first row of each;
// rows are −1 where there is no number.
func extremes(values []float64) (low, high float64, lowest, highest int) {
	low, high, lowest, highest = math.NaN(), math.NaN(), -1, -1
	for i, v := range values {
		if v < low || lowest < 0 && v == v {
			low, lowest = v, i
		}
		if v > high || highest < 0 && v == v {
			high, highest = v, i
		}
	}
	return low, high, lowest, highest
}

// show writes a value of a column with so many significant digits and a
// fitting unit.
func show(e *experiment.Experiment, c table.Column, v float64, digits int) string {
	v, err := strconv.ParseFloat(strconv.FormatFloat(v, 'g', digits, 64), 64)
	if err != nil {
		return "out of range"
	}
	v += 0 // no "-0"
	if d, err := e.Dial(c.Name); err == nil {
		return d.Format(v)
	}
	switch c.Unit {
	case quantity.Time.Unit():
		return quantity.Format(v, quantity.Time)
	case quantity.Rate.Unit():
		return quantity.Format(v, quantity.Rate)
	}
	return strings.TrimSuffix(strconv.FormatFloat(v, 'g', -1, 64)+" "+c.Unit, " 1")
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return strconv.Itoa(n) + " " + what + "s"
}
