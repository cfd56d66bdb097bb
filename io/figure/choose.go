package figure

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"

	"rhotrace/io/table"
)

// A Choice says what of a table is drawn, by names of columns. The zero value is
// the default: the signal, or the populations where there is no readout, over
// what was scanned or over time; two scans give a map of the signal, or a
// family of curves where one of them has five points or fewer.
type Choice struct {
	X      string             // along the horizontal axis
	Y      []string           // curves, or the one column that a map shows
	Across string             // along the vertical axis: makes a map
	At     map[string]float64 // only rows where these columns have (nearly) this value
	Band   bool               // shade signal ± signal.sd, where single measurements will scatter
	Labels map[string]string  // text for a column, in place of its own description
}

// family is how many curves of one column make no map.
const family = 5

// FromTable makes the figure of a table: curves, one panel for each unit among
// them, or a map. An error says what to choose where the table leaves it open.
func FromTable(t *table.Table, choice Choice) (*Figure, error) {
	if err := t.Check(); err != nil {
		return nil, err
	}
	if t.Rows() == 0 {
		return nil, fmt.Errorf("figure: nothing to draw: the table has no rows")
	}
	c := chooser{table: t, Choice: choice, rows: make([]int, t.Rows())}
	for i := range c.rows {
		c.rows[i] = i
	}
	if err := c.restrict(); err != nil {
		return nil, err
	}
	if err := c.columns(); err != nil {
		return nil, err
	}
	if c.across != nil {
		return c.surface()
	}
	return c.curves()
}

// A chooser resolves a choice.
type chooser struct {
	Choice
	table     *table.Table
	rows      []int // those that are drawn
	x, across *table.Column
	y         []*table.Column
	of        *table.Column // curves for every value of this one, nil for none
}

func (c *chooser) column(name string) (*table.Column, error) {
	if column := c.table.Column(name); column != nil {
		return column, nil
	}
	var names []string
	for _, column := range c.table.Columns {
		names = append(names, column.Name)
	}
	return nil, fmt.Errorf("figure: the table has no column %q; it has %s", name, strings.Join(names, ", "))
}

// restrict keeps the rows nearest to the values in At.
func (c *chooser) restrict() error {
	names := make([]string, 0, len(c.At))
	for name := range c.At {
		names = append(names, name)
	}
	slices.Sort(names)
	for _, name := range names {
		column, err := c.column(name)
		if err != nil {
			return err
		}
		distance := func(row int) float64 { return math.Abs(column.Values[row] - c.At[name]) }
		nearest := math.Inf(1)
		for _, row := range c.rows {
			nearest = min(nearest, distance(row))
		}
		c.rows = slices.DeleteFunc(c.rows, func(row int) bool { return !(distance(row) == nearest) })
		if len(c.rows) == 0 {
			return fmt.Errorf("figure: column %q has no value near %g", name, c.At[name])
		}
	}
	return nil
}

// isAnswer says whether a column is what a run computes; the others, time
// included, are what it was asked for.
func isAnswer(name string) bool {
	return name == "signal" || name == "signal.sd" ||
		strings.HasPrefix(name, "population.") || strings.HasPrefix(name, "coherence.")
}

// columns fills in what the choice leaves open.
func (c *chooser) columns() error {
	for _, name := range c.Y {
		column, err := c.column(name)
		if err != nil {
			return err
		}
		c.y = append(c.y, column)
	}
	if len(c.y) == 0 {
		if c.y = c.answers(); len(c.y) == 0 {
			return fmt.Errorf("figure: the table has neither a signal nor populations; choose the columns to draw (Y)")
		}
	}
	varied := c.varied()
	var err error
	switch {
	case c.X != "":
		if c.x, err = c.column(c.X); err != nil {
			return err
		}
	case len(varied) > 0:
		c.x = varied[len(varied)-1]
	default:
		for i := range c.table.Columns { // a single point
			if column := &c.table.Columns[i]; !isAnswer(column.Name) && !slices.Contains(c.y, column) {
				c.x = column
				break
			}
		}
		if c.x == nil {
			return fmt.Errorf("figure: there is nothing to draw against; scan a dial, record samples, or choose a column (X)")
		}
	}
	if c.Across != "" {
		if c.across, err = c.column(c.Across); err != nil {
			return err
		}
	}
	varied = slices.DeleteFunc(varied, func(column *table.Column) bool {
		return column == c.x || column == c.across || slices.Contains(c.y, column) || c.follows(column, c.x)
	})
	if c.X == "" && c.across == nil && len(varied) == 1 &&
		c.count(c.x) <= family && c.count(varied[0]) > family {
		c.x, varied[0] = varied[0], c.x // few values of the first: they make the family
	}
	switch {
	case len(varied) == 0:
		return nil
	case len(varied) == 1 && c.across == nil && c.count(varied[0]) <= family:
		c.of = varied[0]
		return nil
	case len(varied) == 1 && c.across == nil && c.X == "":
		c.across = varied[0]
		return nil
	}
	var names []string
	for _, column := range varied {
		names = append(names, fmt.Sprintf("%s (%d values)", column.Name, c.count(column)))
	}
	return fmt.Errorf("figure: beside %s these vary too: %s; choose one value of each (At), or one of them for the other axis of a map (Across)",
		c.x.Name, strings.Join(names, ", "))
}

// answers are the columns that are drawn unless said.
func (c *chooser) answers() []*table.Column {
	if signal := c.table.Column("signal"); signal != nil {
		return []*table.Column{signal}
	}
	var out []*table.Column
	for i := range c.table.Columns {
		if strings.HasPrefix(c.table.Columns[i].Name, "population.") {
			out = append(out, &c.table.Columns[i])
		}
	}
	return out
}

// varied are the columns that were scanned, slowest first, time last; of columns
// that run together, the first.
func (c *chooser) varied() []*table.Column {
	var out []*table.Column
	for i := range c.table.Columns {
		column := &c.table.Columns[i]
		if isAnswer(column.Name) && column.Name != c.X || slices.Contains(c.y, column) || c.count(column) < 2 {
			continue
		}
		if !slices.ContainsFunc(out, func(other *table.Column) bool { return c.follows(column, other) }) {
			out = append(out, column)
		}
	}
	return out
}

// count returns how many values a column takes.
func (c *chooser) count(column *table.Column) int { return len(c.values(column)) }

// values are those of a column, increasing, each once, without NaN.
func (c *chooser) values(column *table.Column) []float64 {
	out := make([]float64, 0, len(c.rows))
	for _, row := range c.rows {
		if v := column.Values[row]; !math.IsNaN(v) {
			out = append(out, v)
		}
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// follows says whether a column has one value for each value of the other.
func (c *chooser) follows(column, other *table.Column) bool {
	seen := make(map[float64]float64)
	for _, row := range c.rows {
		v, ok := seen[other.Values[row]]
		if ok && v != column.Values[row] {
			return false
		}
		seen[other.Values[row]] = column.Values[row]
	}
	return true
}

// curves draws every column of y, one panel for each unit.
func (c *chooser) curves() (*Figure, error) {
	f := &Figure{}
	x := c.axis(c.x)
	groups := []float64{0}
	if c.of != nil {
		groups = c.values(c.of)
	}
	var units []string
	for _, column := range c.y {
		if !slices.Contains(units, column.Unit) {
			units = append(units, column.Unit)
		}
	}
	for _, unit := range units {
		of := slices.DeleteFunc(slices.Clone(c.y), func(column *table.Column) bool { return column.Unit != unit })
		panel := Panel{X: x, Y: Axis{Label: c.common(of), Unit: unit}}
		for _, column := range of {
			for _, value := range groups {
				panel.Lines = append(panel.Lines, c.line(column, value, len(of) > 1))
			}
		}
		f.Panels = append(f.Panels, panel)
	}
	return f, nil
}

// line is the curve of one column, where c.of has that value.
func (c *chooser) line(column *table.Column, value float64, several bool) Line {
	rows := c.rows
	if c.of != nil {
		rows = slices.DeleteFunc(slices.Clone(rows), func(row int) bool { return c.of.Values[row] != value })
	}
	rows = slices.Clone(rows)
	slices.SortStableFunc(rows, func(a, b int) int {
		return compare(c.x.Values[a], c.x.Values[b])
	})
	var l Line
	var names []string
	if several {
		names = append(names, c.short(column))
	}
	if c.of != nil {
		names = append(names, c.given(c.of, value))
	}
	l.Label = strings.Join(names, ", ")
	sd := c.table.Column("signal.sd")
	for _, row := range rows {
		l.X = append(l.X, c.x.Values[row])
		y := column.Values[row]
		l.Y = append(l.Y, y)
		if c.Band && column.Name == "signal" && sd != nil {
			l.Low = append(l.Low, y-sd.Values[row])
			l.High = append(l.High, y+sd.Values[row])
		}
	}
	return l
}

func compare(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// surface draws the map.
func (c *chooser) surface() (*Figure, error) {
	if len(c.y) != 1 {
		return nil, fmt.Errorf("figure: a map over %s and %s shows one column, there are %d; choose one (Y)", c.x.Name, c.across.Name, len(c.y))
	}
	m := &Map{X: c.values(c.x), Y: c.values(c.across), Value: c.axis(c.y[0])}
	m.Value.Log = false
	if len(m.X)*len(m.Y) != len(c.rows) {
		return nil, fmt.Errorf("figure: the %d rows do not fill a grid of %d values of %s by %d of %s; choose one value of either (At)",
			len(c.rows), len(m.X), c.x.Name, len(m.Y), c.across.Name)
	}
	m.Values = make([][]float64, len(m.X))
	for i := range m.Values {
		m.Values[i] = make([]float64, len(m.Y))
	}
	taken := make(map[[2]int]bool, len(c.rows))
	for _, row := range c.rows {
		i, _ := slices.BinarySearch(m.X, c.x.Values[row])
		j, _ := slices.BinarySearch(m.Y, c.across.Values[row])
		if i == len(m.X) || j == len(m.Y) || taken[[2]int{i, j}] {
			return nil, fmt.Errorf("figure: row %d has no place of its own in the grid of %s and %s; choose other columns", row, c.x.Name, c.across.Name)
		}
		taken[[2]int{i, j}] = true
		m.Values[i][j] = c.y[0].Values[row]
	}
	return &Figure{Panels: []Panel{{X: c.axis(c.x), Y: c.axis(c.across), Map: m}}}, nil
}

// axis makes the axis of a column, logarithmic where its values are spaced so.
func (c *chooser) axis(column *table.Column) Axis {
	a := Axis{Label: c.long(column), Unit: column.Unit}
	a.Log = !isAnswer(column.Name) && evenRatios(c.values(column))
	return a
}

// evenRatios says whether increasing values are spaced logarithmically: four at
// least, over a factor of three at least, ratios equal to a millionth.
func evenRatios(values []float64) bool {
	n := len(values)
	if n < 4 || values[0] <= 0 || values[n-1]/values[0] < 3 {
		return false
	}
	step := math.Log(values[n-1]/values[0]) / float64(n-1)
	for i := 1; i < n; i++ {
		if math.Abs(math.Log(values[i]/values[i-1])-step) > 1e-6*step {
			return false
		}
	}
	return true
}

// long describes a column along an axis: the description, with the path of a
// dial behind it, since several dials share a description.
func (c *chooser) long(column *table.Column) string {
	if text, ok := c.Labels[column.Name]; ok {
		return text
	}
	text := capital(column.About)
	switch {
	case text == "":
		return column.Name
	case !isAnswer(column.Name) && strings.Contains(column.Name, "."):
		return text + ", " + column.Name
	}
	return text
}

// short names a column in a legend: "e" for population.e, "Re g:e" for coherence.g:e.re.
func (c *chooser) short(column *table.Column) string {
	if text, ok := c.Labels[column.Name]; ok {
		return text
	}
	if level, ok := strings.CutPrefix(column.Name, "population."); ok {
		return level
	}
	if pair, ok := strings.CutPrefix(column.Name, "coherence."); ok {
		if name, ok := strings.CutSuffix(pair, ".re"); ok {
			return "Re " + name
		}
		if name, ok := strings.CutSuffix(pair, ".im"); ok {
			return "Im " + name
		}
	}
	return column.Name
}

// common labels an axis that several columns share.
func (c *chooser) common(columns []*table.Column) string {
	if len(columns) == 1 {
		return c.long(columns[0])
	}
	var kinds []string
	for _, column := range columns {
		kind, _, _ := strings.Cut(column.Name, ".")
		if !slices.Contains(kinds, kind) {
			kinds = append(kinds, kind)
		}
	}
	return capital(strings.Join(kinds, ", "))
}

// given writes "name = value unit" for one curve of a family.
func (c *chooser) given(column *table.Column, value float64) string {
	name := column.Name
	if text, ok := c.Labels[name]; ok {
		name = text
	}
	s := scale{size: 1, unit: printedUnit(column.Unit)}
	if math.Abs(value) > smallest {
		s = scaleFor(column.Unit, min(value, 0), max(value, 0), false)
	}
	text := strings.Replace(fmt.Sprintf("%s = %.6g", name, s.shown(value)), "= -", "= −", 1)
	return strings.TrimSpace(text + " " + s.unit)
}

func capital(text string) string {
	r, n := utf8.DecodeRuneInString(text)
	if n == 0 || r == utf8.RuneError {
		return text
	}
	// A symbol such as "ρ_ab" or "Rabi" stays as it is; a word gets a capital.
	if next, _ := utf8.DecodeRuneInString(text[n:]); !unicode.IsLetter(next) {
		return text
	}
	return string(unicode.ToUpper(r)) + text[n:]
}
