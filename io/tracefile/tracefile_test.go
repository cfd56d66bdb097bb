package tracefile

import (
	"bytes"
	"encoding/binary"
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"testing/iotest"
	"unicode/utf16"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func read(t *testing.T, text string) *Trace {
	t.Helper()
	trace, err := Read("a.csv", strings.NewReader(text))
	require.NoError(t, err, "%q", text)
	return trace
}

func names(t *Trace) (list []string) {
	for _, c := range t.Columns {
		list = append(list, c.Name)
	}
	return list
}

func rowsOf(t *Trace) [][]float64 {
	rows := make([][]float64, len(t.Lines))
	for i := range rows {
		for _, c := range t.Columns {
			rows[i] = append(rows[i], c.Values[i])
		}
	}
	return rows
}

// The same four numbers, written in all the ways there are. Data are invented.
func TestWaysToWrite(t *testing.T) {
	want := [][]float64{{0.5, 1e-3}, {-1.25, 40}}
	for name, c := range map[string]struct {
		text    string
		names   string
		lines   string
		remarks []string
	}{
		"commas":                  {"t,y\n0.5,1e-3\n-1.25,40\n", "t y", "2 3", []string{"commas", "point", "line 1"}},
		"blank after comma":       {"t, y\n0.5, 1e-3\n-1.25 , 40\n", "t y", "2 3", []string{"commas"}},
		"no line end at the end":  {"t,y\n0.5,1e-3\n-1.25,40", "t y", "2 3", nil},
		"CR LF":                   {"t,y\r\n0.5,1e-3\r\n-1.25,40\r\n", "t y", "2 3", nil},
		"CR alone":                {"t,y\r0.5,1e-3\r-1.25,40\r", "t y", "2 3", nil},
		"mixed ends":              {"t,y\r\r0.5,1e-3\n\r\n-1.25,40\r\n", "t y", "3 5", nil},
		"semicolons":              {"t;y\n0.5;1e-3\n-1.25;40\n", "t y", "2 3", []string{"semicolons", "point"}},
		"decimal commas":          {"t;y\n0,5;1e-3\n-1,25;40\n", "t y", "2 3", []string{"semicolons", "decimals follow a comma"}},
		"decimal commas and tabs": {"t\ty\n0,5\t0,001\n-1,25\t40\n", "t y", "2 3", []string{"tabs", "a comma"}},
		"decimal commas, blanks":  {"t y\n0,5 0,001\n-1,25 40\n", "t y", "2 3", []string{"blanks", "a comma"}},
		"tabs":                    {"t\ty\n0.5\t1e-3\n-1.25\t40\n", "t y", "2 3", []string{"tabs"}},
		"blanks":                  {"t y\n0.5    1e-3\n  -1.25 40 \n", "t y", "2 3", []string{"blanks"}},
		"tabs and blanks mixed":   {"  t\t y\n 0.5\t\t1e-3\n-1.25 \t40\n", "t y", "2 3", []string{"blanks"}},
		"no header":               {"0.5,1e-3\n-1.25,40\n", "1 2", "1 2", []string{"no header", "1 to 2"}},
		"no header, decimals":     {"0,5;1e-3\n-1,25;40\n", "1 2", "1 2", []string{"no header", "a comma"}},
		"remarks":                 {"# one\n% two\n// three\nt,y\n0.5,1e-3\n# four\n-1.25,40\n", "t y", "5 7", []string{"4 lines were left out as remarks"}},
		"semicolon remarks":       {"; one; or two\n;three\nt,y\n0.5,1e-3\n-1.25,40\n", "t y", "4 5", []string{"2 lines were left out"}},
		"semicolons of both uses": {"; one\nt;y\n0.5;1e-3\n-1.25;40\n", "t y", "3 4", []string{"1 line was left out"}},
		"names in a remark":       {"# made today, by hand, twice\n# t y\n0.5 1e-3\n-1.25 40\n", "t y", "3 4", []string{`remark above the numbers: "t", "y"`}},
		"names behind semicolon":  {"; t y\n0.5 1e-3\n-1.25 40\n", "t y", "2 3", []string{"remark above"}},
		"remark with numbers":     {"# run 7\n0.5 1e-3\n-1.25 40\n", "1 2", "2 3", []string{"no header"}},
		"remark of other length":  {"# a run of today\n0.5 1e-3\n-1.25 40\n", "1 2", "2 3", []string{"no header"}},
		"quotes":                  {"\"t\",\"y\"\n\"0.5\",1e-3\n-1.25,\"40\"\n", "t y", "2 3", nil},
		"units":                   {"t,y\nms,V\n0.5,1e-3\n-1.25,40\n", "t y", "3 4", []string{"line 2 was taken for units and left out: ms,V"}},
		"units for some":          {"t,y\n(ms),\n0.5,1e-3\n-1.25,40\n", "t y", "3 4", []string{"units"}},
		"trailing separators":     {"t,y,\n0.5,1e-3,\n-1.25,40,\n", "t y", "2 3", nil},
		"trailing in rows only":   {"t;y\n0.5;1e-3;;\n-1.25;40;;\n", "t y", "2 3", nil},
		"trailing in header only": {"t,y,,\n0.5,1e-3\n-1.25,40\n", "t y", "2 3", nil},
		"trailing tabs":           {"t\ty\t\n0.5\t1e-3\t\n-1.25\t40\t\n", "t y", "2 3", nil},
		"byte order mark":         {"\ufefft,y\n0.5,1e-3\n-1.25,40\n", "t y", "2 3", nil},
		"mark before numbers":     {"\ufeff0.5,1e-3\n-1.25,40\n", "1 2", "1 2", nil},
		"Latin-1":                 {"t,y\xb5\n0.5,1e-3\n-1.25,40\n", "t yµ", "2 3", []string{"Latin-1"}},
		"old end mark":            {"t,y\r\n0.5,1e-3\r\n-1.25,40\r\n\x1a", "t y", "2 3", nil},
		"blank lines":             {"\n\nt,y\n\n0.5,1e-3\n   \n-1.25,40\n\n", "t y", "5 7", nil},
		"empty rows":              {"t,y\n0.5,1e-3\n,\n-1.25,40\n , \n", "t y", "2 4", []string{"2 rows were left out", "lines 3, 5"}},
		"true minus sign":         {"t,y\n0.5,1e-3\n−1.25,40\n", "t y", "2 3", nil},
		"plus and big E":          {"t,y\n+.5,1E-3\n-1.25,4.E+1\n", "t y", "2 3", nil},
	} {
		t.Run(name, func(t *testing.T) {
			trace := read(t, c.text)
			assert.Equal(t, c.names, strings.Join(names(trace), " "))
			assert.Equal(t, want, rowsOf(trace))
			assert.Equal(t, "["+c.lines+"]", fmt.Sprint(trace.Lines))
			for _, r := range c.remarks {
				assert.Contains(t, strings.Join(trace.Remarks, "\n"), r)
			}
			again, err := Read("a.csv", bytes.NewReader(trace.Text))
			require.NoError(t, err)
			assert.Equal(t, trace.Columns, again.Columns)
			assert.Equal(t, trace.Lines, again.Lines)
		})
	}
}

func TestUTF16(t *testing.T) {
	for _, order := range []binary.AppendByteOrder{binary.LittleEndian, binary.BigEndian} {
		var raw []byte
		for _, u := range utf16.Encode([]rune("\ufeffµs;y\r\n0,5;1\r\n")) {
			raw = order.AppendUint16(raw, u)
		}
		for _, tail := range [][]byte{nil, {0}} { // half a sign at the end is passed over
			trace, err := Read("a.csv", bytes.NewReader(append(raw, tail...)))
			require.NoError(t, err)
			assert.Equal(t, []string{"µs", "y"}, names(trace))
			assert.Equal(t, [][]float64{{0.5, 1}}, rowsOf(trace))
			assert.Contains(t, trace.Remarks[0], "UTF-16")
			assert.Equal(t, "µs;y\r\n0,5;1\r\n", string(trace.Text))
		}
	}
}

func TestHeaders(t *testing.T) {
	for _, c := range []struct {
		text  string
		names []string
	}{
		{"\"wait, ms\",\"the \"\"signal\"\"\"\n1,2\n", []string{"wait, ms", `the "signal"`}},
		{"\"wait ms\" signal\n1 2\n", []string{"wait ms", "signal"}},
		{"wait ms   the signal\n1   2\n", []string{"wait ms", "the signal"}},
		{"wait ms\tthe signal\n1 2\n3 4\n", []string{"wait ms", "the signal"}},
		{"t,,y\n1,2,3\n", []string{"t", "2", "y"}},
		{",a,b\n1,2,3\n", []string{"1", "a", "b"}},
		{"t,y,\n1,2,3\n", []string{"t", "y", "3"}},
		{"t,0.5,1.0\n1,2,3\n", []string{"t", "0.5", "1.0"}},
		{"coherence.g:e.re,step.dark.lasts\n1,2\n", []string{"coherence.g:e.re", "step.dark.lasts"}},
		{"y\n1\n2\n", []string{"y"}},
		{"\"#\",y\n1,2\n", []string{"#", "y"}},
	} {
		trace := read(t, c.text)
		assert.Equal(t, c.names, names(trace), "%q", c.text)
		assert.Equal(t, 1.0, trace.Columns[0].Values[0])
	}
}

// The decimal mark shows below the rows that decide on the separator.
func TestDecimalsLateInTheFile(t *testing.T) {
	text := "t;y\n" + strings.Repeat("1;2\n", 300)
	assert.Equal(t, 2.5, read(t, text+"1;2,5\n").Columns[1].Values[300])
	assert.Equal(t, 2.5, read(t, text+"1;2.5\n").Columns[1].Values[300])
}

func TestMissing(t *testing.T) {
	trace := read(t, "t,y,z\n1,2,3\n2,,3\n3,nan,NaN\n4,N/A,\n5,-,null\n6,2,inf\n7,2,-Inf\n8,1,\n9,1,1\n")
	assert.Len(t, trace.Lines, 9)
	for i := range 4 {
		assert.True(t, math.IsNaN(trace.Columns[1].Values[1+i]))
	}
	assert.True(t, math.IsInf(trace.Columns[2].Values[5], 1))
	assert.True(t, math.IsNaN(trace.Columns[2].Values[7]))
	assert.Contains(t, trace.Remarks[len(trace.Remarks)-1], "7 rows have no finite number in some cell (lines 3, 4, 5, 6, 7, 8, 9)")

	trace = read(t, "1,\n2,3\n") // the last cell of the first row is empty, not absent
	assert.Equal(t, []string{"1", "2"}, names(trace))
	assert.True(t, math.IsNaN(trace.Columns[1].Values[0]))
	assert.Contains(t, trace.Remarks[len(trace.Remarks)-1], "1 row has no finite number in some cell (line 1)")

	long := read(t, "t,y\n1,2\n"+strings.Repeat("1,\n", 50))
	assert.Contains(t, long.Remarks[len(long.Remarks)-1], "50 rows have no finite number in some cell (lines 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, …)")
}

func TestFaults(t *testing.T) {
	for _, c := range []struct {
		name, text string
		says       []string
	}{
		{"text in a column", "t,y\n1,2\n3,abc\n", []string{"a.csv:3: column 2 (\"y\"): \"abc\" is not a number", "#"}},
		{"text without header", "1,2\n3,4\n5,6x\n", []string{"a.csv:3: column 2: \"6x\""}},
		{"text in the first row", "1,2x\n3,4\n5,6\n", []string{"a.csv:1: column 2: \"2x\""}},
		{"hexadecimal", "1,2\n0x10p1,4\n", []string{"a.csv:2: column 1"}},
		{"digits in groups", "t;y\n1;2.5\n1;1,234.5\n", []string{"a.csv:3: column 2 (\"y\")"}},
		{"too large", "t,y\n1,2\n1,1e999\n", []string{"a.csv:3", "1e999"}},
		{"two lines of header", "Heron station,run 7\nt,y\nms,V\n1,2\n", []string{"a.csv:2: column 1", "#"}},
		{"row short", "t,y,z\n1,2,3\n1,2\n1,2,3\n", []string{"a.csv:3: has 2 cells, the table has 3 columns", "commas"}},
		{"row short after empty last cells", "t,y,z\n1,2,\n1,2\n1,2,3\n", []string{"a.csv:3: has 2 cells"}},
		{"row short, commas that could be decimal", "1,2\n3,4\n5\n", []string{"a.csv:3: has 1 cell, the table has 2 columns"}},
		{"most rows short", "1,2\n3\n4\n", []string{"a.csv:2: has 1 cell"}},
		{"row long", "t,y\n1,2\n1,2,3\n", []string{"a.csv:3: has 3 cells, the table has 2 columns"}},
		{"row long without header", "1 2\n3 4\n1 2 3\n", []string{"a.csv:3: has 3 cells", "blanks"}},
		{"header of blanks too long", "wait time y\n1 2\n", []string{"a.csv:1: the header has 3 names, the row below has 2 cells", "double quotes"}},
		{"header only", "t,y\n", []string{"a.csv: has no rows of numbers", "line 1"}},
		{"header and empty cells", "t,y\n,\n", []string{"no rows of numbers", "empty"}},
		{"empty", "", []string{"a.csv: has no rows of numbers (it is empty)"}},
		{"blank lines", "\n \r\n\t\n", []string{"only blank lines"}},
		{"remarks", "# a\n% b\n", []string{"only remarks"}},
		{"semicolon remarks", "; a\n; b\n", []string{"only remarks"}},
		{"binary", "ARROW1\x00\x00\xff\xff", []string{"a.csv: is binary", "CSV"}},
		{"binary behind a mark", "\xff\xfe\x00\x00\x01\x00", []string{"binary"}},
		{"prose", "Dear colleague,\nhere are the data.\n", []string{"a.csv:2: column 1"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			trace, err := Read("a.csv", strings.NewReader(c.text))
			require.Error(t, err)
			assert.Nil(t, trace)
			for _, s := range c.says {
				assert.ErrorContains(t, err, s)
			}
		})
	}
}

func TestReadFile(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "a.csv")
	require.NoError(t, os.WriteFile(path, []byte("t,y\n1,2\n"), 0o600))
	trace, err := ReadFile(path)
	require.NoError(t, err)
	assert.Equal(t, path, trace.Name)
	assert.Equal(t, "t,y\n1,2\n", string(trace.Text))

	_, err = ReadFile(dir)
	assert.EqualError(t, err, dir+": is a directory; name the file with the trace")
	_, err = ReadFile(path + "x")
	assert.ErrorContains(t, err, path+"x: cannot be read: ")
	assert.ErrorContains(t, err, "check the name")
	assert.ErrorIs(t, err, os.ErrNotExist)
	assert.Equal(t, 1, strings.Count(err.Error(), path))

	broken := errors.New("the disk is gone")
	_, err = Read("b.csv", iotest.ErrReader(broken))
	assert.ErrorIs(t, err, broken)
	assert.ErrorContains(t, err, "b.csv: cannot be read")
}

func TestColumn(t *testing.T) {
	trace := read(t, "wait_ms,bright,2,bright\n1,2,3,4\n")
	for name, want := range map[string]float64{"wait_ms": 1, "1": 1, "2": 3, "4": 4, "3": 3} {
		c, err := trace.Column(name)
		require.NoError(t, err)
		assert.Equal(t, want, c.Values[0], name)
	}
	for name, says := range map[string][]string{
		"wait_sm": {`a.csv: has no column "wait_sm"; did you mean "wait_ms"?`, `"wait_ms", "bright", "2", "bright"`},
		"bright":  {"columns 2 and 4 are both named", "number"},
		"5":       {"no column"}, "0": {"no column"}, "-1": {"no column"}, "": {"no column"},
	} {
		_, err := trace.Column(name)
		require.Error(t, err, name)
		for _, s := range says {
			assert.ErrorContains(t, err, s)
		}
	}
	wide := read(t, strings.Repeat("1,", 40)+"2\n")
	_, err := wide.Column("signal")
	assert.ErrorContains(t, err, `"12" and 29 more`)
}

// Tables of random size, values and holes, written in every layout, come back
// with the same bits. encoding/csv of the standard library writes those with
// commas, semicolons and tabs.
func TestRoundTrip(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	for n := range 200 {
		columns, rows := 2+random.IntN(4), 1+random.IntN(30)
		want := make([][]float64, rows)
		for i := range want {
			for range columns {
				v := random.NormFloat64() * math.Pow(10, float64(random.IntN(20)-10))
				if len(want[i]) > 0 && i > 0 && random.IntN(10) == 0 {
					v = math.NaN()
				}
				want[i] = append(want[i], v)
			}
		}
		l := layouts[n%len(layouts)]
		var out bytes.Buffer
		w := csv.NewWriter(&out)
		w.Comma = ' '
		if l.separator != 0 {
			w.Comma = rune(l.separator)
		}
		w.UseCRLF = n%2 == 0
		if n%3 > 0 {
			header := make([]string, columns)
			for i := range header {
				header[i] = "column " + strconv.Itoa(i)
			}
			require.NoError(t, w.Write(header))
		}
		for _, r := range want {
			cells := make([]string, columns)
			for i, v := range r {
				cells[i] = strings.Replace(strconv.FormatFloat(v, 'g', -1, 64), ".", string(rune(l.decimal)), 1)
				if math.IsNaN(v) && l.separator != 0 {
					cells[i] = ""
				}
			}
			require.NoError(t, w.Write(cells))
		}
		w.Flush()
		got := rowsOf(read(t, out.String()))
		require.Len(t, got, rows, out.String())
		for i := range want {
			for j := range want[i] {
				if !math.IsNaN(want[i][j]) {
					require.Equal(t, math.Float64bits(want[i][j]), math.Float64bits(got[i][j]), out.String())
				} else {
					require.True(t, math.IsNaN(got[i][j]), out.String())
				}
			}
		}
	}
}

// Whatever the bytes: no panic; an error names the file; a trace has columns of
// equal length, a line for each row, and reads the same from its own text.
func FuzzRead(f *testing.F) {
	for _, s := range []string{
		"t,y\n1,2\n", "t;y\r1,5;2\r", "1 2\n3 4", "# t y\n1 2\n", "; a\n;1;2\n;3;4\n", "t,y\nms,V\n1,2\n", "\"a\"\"b\",\"c,d\"\n1,\"2\"\n", "\"open,1\n2,3\n",
		"\xff\xfe1\x00,\x002\x00", "\xfe\xff\x001", "\ufeff1,2", "1,\n2,3\n", ",\n,\n", ";;;\n1;2;3;4\n", "a\n\x1a", "\xb5,1\n2,3", "1,2,3\n1,2\n", "−1\n−\n", "nan\n-\n1\n",
		"#\n//\n%\n1", " \t1\v2\f3", "1e999", "0x1p-2", "a,b\n\n\n1,2\r\r\n", "t y\n1 2 \n", "1,2;3", "-inf,+inf", "\"\"\n1",
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		trace, err := Read("f.csv", bytes.NewReader(raw))
		if err != nil {
			require.True(t, strings.HasPrefix(err.Error(), "f.csv:"), err.Error())
			require.Nil(t, trace)
			return
		}
		require.NotEmpty(t, trace.Columns)
		require.NotEmpty(t, trace.Lines)
		for i, line := range trace.Lines {
			require.GreaterOrEqual(t, line, 1)
			require.True(t, i == 0 || line > trace.Lines[i-1])
		}
		for i, c := range trace.Columns {
			require.Len(t, c.Values, len(trace.Lines))
			require.NotEmpty(t, c.Name)
			_, err := trace.Column(strconv.Itoa(i + 1))
			require.True(t, err == nil || strings.Contains(err.Error(), "both named"))
		}
		again, err := Read("f.csv", bytes.NewReader(trace.Text))
		require.NoError(t, err)
		require.Equal(t, trace.Lines, again.Lines)
		require.Equal(t, fmt.Sprint(trace.Columns), fmt.Sprint(again.Columns))
	})
}

// A million rows of three columns.
func BenchmarkRead(b *testing.B) {
	for _, name := range []string{"commas", "blanks", "quotes"} {
		var text bytes.Buffer
		text.WriteString("t,y,e\n")
		for i := range 1_000_000 {
			switch name {
			case "commas":
				fmt.Fprintf(&text, "%g,%.6f,%.3e\n", float64(i)*0.25, math.Sin(float64(i)), 0.0123)
			case "blanks":
				fmt.Fprintf(&text, "%12g %12.6f %12.3e\n", float64(i)*0.25, math.Sin(float64(i)), 0.0123)
			case "quotes":
				fmt.Fprintf(&text, "\"%g\",%.6f,%.3e\n", float64(i)*0.25, math.Sin(float64(i)), 0.0123)
			}
		}
		raw := text.Bytes()
		if name == "blanks" {
			raw = raw[len("t,y,e\n"):]
		}
		b.Run(name, func(b *testing.B) {
			b.SetBytes(int64(len(raw)))
			b.ReportAllocs()
			for b.Loop() {
				if _, err := Read("a.csv", bytes.NewReader(raw)); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
