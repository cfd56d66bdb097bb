package arrowfile_test

import (
	"bytes"
	"errors"
	"io"
	"math"
	"testing"

	"rhotrace/io/arrowfile"
	"rhotrace/io/table"

	"github.com/apache/arrow/go/v15/arrow"
	"github.com/apache/arrow/go/v15/arrow/array"
	"github.com/apache/arrow/go/v15/arrow/ipc"
	"github.com/apache/arrow/go/v15/arrow/memory"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// sample is a table of that many rows, with every kind of number in it.
func sample(rows int) *table.Table {
	x, y := make([]float64, rows), make([]float64, rows)
	for i := range x {
		x[i], y[i] = 1e-6*float64(i), math.Sqrt(float64(i))
	}
	copy(y, []float64{math.NaN(), math.Inf(1), math.Inf(-1), math.Copysign(0, -1), math.SmallestNonzeroFloat64, math.MaxFloat64})
	t := &table.Table{
		Meta: map[string]string{
			table.MetaExperiment:        "format = 1\ntitle = \"ν = 5 µs, \\\"quoted\\\"\"\n",
			table.MetaVersion:           "test",
			table.MetaFile + "wave.csv": "t,amplitude\n0,1\n",
		},
		Warnings: []string{`the fringe "washes out"`, "see column signal"},
	}
	t.Add("step.dark.lasts", "s", "duration of step dark", x)
	t.Add("signal", "1", "probability of being called bright", y)
	return t
}

// equal compares to the last bit, which assert.Equal cannot do for NaN and -0.
func equal(t *testing.T, want, got *table.Table) {
	t.Helper()
	require.NotNil(t, got)
	assert.Equal(t, want.Meta, got.Meta)
	assert.Equal(t, want.Warnings, got.Warnings)
	require.Len(t, got.Columns, len(want.Columns))
	for i, w := range want.Columns {
		g := got.Columns[i]
		assert.Equal(t, []string{w.Name, w.Unit, w.About}, []string{g.Name, g.Unit, g.About})
		require.Len(t, g.Values, len(w.Values), w.Name)
		for row := range w.Values {
			if math.Float64bits(w.Values[row]) != math.Float64bits(g.Values[row]) {
				t.Fatalf("%s, row %d: %v became %v", w.Name, row, w.Values[row], g.Values[row])
			}
		}
	}
}

type write func(io.Writer, *table.Table) error

var formats = map[string]write{"file": arrowfile.Write, "stream": arrowfile.WriteStream}

func TestRoundTrip(t *testing.T) {
	for name, write := range formats {
		for _, rows := range []int{0, 1, 7, 1 << 16, 1<<16 + 1, 200001} {
			t.Run(name, func(t *testing.T) {
				want := sample(rows)
				var out bytes.Buffer
				require.NoError(t, write(&out, want))
				got, err := arrowfile.Read(&out)
				require.NoError(t, err)
				equal(t, want, got)
			})
		}
		t.Run(name+" without columns", func(t *testing.T) {
			var out bytes.Buffer
			require.NoError(t, write(&out, &table.Table{}))
			got, err := arrowfile.Read(&out)
			require.NoError(t, err)
			assert.Empty(t, got.Columns)
			assert.Empty(t, got.Meta)
			assert.Empty(t, got.Warnings)
		})
	}
}

// TestLibraryReads reads with the library's own readers, so that nothing rests
// on Read undoing what Write did.
func TestLibraryReads(t *testing.T) {
	want := sample(100000)
	var file, stream bytes.Buffer
	require.NoError(t, arrowfile.Write(&file, want))
	require.NoError(t, arrowfile.WriteStream(&stream, want))

	schema := func(s *arrow.Schema) {
		require.Equal(t, 2, s.NumFields())
		assert.Equal(t, "step.dark.lasts", s.Field(0).Name)
		assert.Equal(t, arrow.PrimitiveTypes.Float64, s.Field(0).Type)
		assert.Equal(t, map[string]string{"unit": "s", "about": "duration of step dark"}, s.Field(0).Metadata.ToMap())
		metadata := s.Metadata()
		assert.Equal(t, want.Record(), metadata.ToMap())
	}
	in, err := ipc.NewFileReader(bytes.NewReader(file.Bytes()))
	require.NoError(t, err)
	schema(in.Schema())
	require.Equal(t, 2, in.NumRecords(), "batches are bounded")
	row := 0
	for i := range in.NumRecords() {
		record, err := in.Record(i)
		require.NoError(t, err)
		require.LessOrEqual(t, record.NumRows(), int64(1<<16))
		for _, v := range record.Column(0).(*array.Float64).Float64Values() {
			require.Equal(t, want.Columns[0].Values[row], v)
			row++
		}
	}
	assert.Equal(t, 100000, row)

	// A file without its first eight bytes is a stream with a footer behind it.
	for name, data := range map[string][]byte{"stream": stream.Bytes(), "inside of the file": file.Bytes()[8:]} {
		t.Run(name, func(t *testing.T) {
			in, err := ipc.NewReader(bytes.NewReader(data))
			require.NoError(t, err)
			schema(in.Schema())
			rows := int64(0)
			for in.Next() {
				rows += in.Record().NumRows()
			}
			require.NoError(t, in.Err())
			assert.Equal(t, int64(100000), rows)
		})
	}
}

// TestSameBytes: equal tables give equal files, metadata included.
func TestSameBytes(t *testing.T) {
	for name, write := range formats {
		t.Run(name, func(t *testing.T) {
			var first, second bytes.Buffer
			require.NoError(t, write(&first, sample(100)))
			require.NoError(t, write(&second, sample(100)))
			assert.True(t, bytes.Equal(first.Bytes(), second.Bytes()))
		})
	}
}

func TestWriterInParts(t *testing.T) {
	want := sample(150000)
	for name, start := range map[string]func(io.Writer, *table.Table) (*arrowfile.Writer, error){
		"file": arrowfile.NewFileWriter, "stream": arrowfile.NewStreamWriter,
	} {
		t.Run(name, func(t *testing.T) {
			head := sample(0)
			var out bytes.Buffer
			w, err := start(&out, head)
			require.NoError(t, err)
			for _, cut := range [][2]int{{0, 1}, {1, 1}, {1, 100000}, {100000, 150000}} {
				require.NoError(t, w.Append(want.Columns[0].Values[cut[0]:cut[1]], want.Columns[1].Values[cut[0]:cut[1]]))
			}
			require.NoError(t, w.Close())
			got, err := arrowfile.Read(&out)
			require.NoError(t, err)
			equal(t, want, got)

			assert.PanicsWithValue(t, "arrowfile: 1 slices for 2 columns", func() { _ = w.Append([]float64{1}) })
			assert.PanicsWithValue(t, `arrowfile: 0 rows for column "signal", 1 for column "step.dark.lasts"`,
				func() { _ = w.Append([]float64{1}, nil) })
		})
	}
}

// TestStreamArrivesEarly: rows can be read before the stream is complete.
func TestStreamArrivesEarly(t *testing.T) {
	var out bytes.Buffer
	w, err := arrowfile.NewStreamWriter(&out, sample(0))
	require.NoError(t, err)
	require.NoError(t, w.Append([]float64{1, 2}, []float64{3, 4}))
	in, err := ipc.NewReader(bytes.NewReader(out.Bytes()))
	require.NoError(t, err)
	require.True(t, in.Next())
	assert.Equal(t, int64(2), in.Record().NumRows())

	_, err = arrowfile.Read(bytes.NewReader(out.Bytes()))
	assert.ErrorContains(t, err, "the stream has no end mark, so it was cut short")
}

// other writes a stream that this package would not write.
func other(t *testing.T, field arrow.Field, metadata map[string]string, build func(memory.Allocator) arrow.Array, opts ...ipc.Option) []byte {
	t.Helper()
	m := arrow.MetadataFrom(metadata)
	schema := arrow.NewSchema([]arrow.Field{field}, &m)
	var out bytes.Buffer
	w := ipc.NewWriter(&out, append(opts, ipc.WithSchema(schema))...)
	column := build(memory.DefaultAllocator)
	require.NoError(t, w.Write(array.NewRecord(schema, []arrow.Array{column}, int64(column.Len()))))
	require.NoError(t, w.Close())
	return out.Bytes()
}

func floats(values []float64, valid []bool) func(memory.Allocator) arrow.Array {
	return func(m memory.Allocator) arrow.Array {
		b := array.NewFloat64Builder(m)
		b.AppendValues(values, valid)
		return b.NewArray()
	}
}

func TestReadOthers(t *testing.T) {
	float := arrow.Field{Name: "x", Type: arrow.PrimitiveTypes.Float64, Nullable: true}
	got, err := arrowfile.Read(bytes.NewReader(other(t, float, nil, floats([]float64{1, 2, 3}, []bool{true, false, true}))))
	require.NoError(t, err)
	assert.Equal(t, 1.0, got.Columns[0].Values[0])
	assert.True(t, math.IsNaN(got.Columns[0].Values[1]), "a null becomes NaN")
	assert.Equal(t, 3.0, got.Columns[0].Values[2])
	assert.Equal(t, "", got.Columns[0].Unit)

	values := make([]float64, 1000)
	for i := range values {
		values[i] = float64(i % 10)
	}
	for _, compressed := range []ipc.Option{ipc.WithLZ4(), ipc.WithZstd()} {
		got, err := arrowfile.Read(bytes.NewReader(other(t, float, nil, floats(values, nil), compressed)))
		require.NoError(t, err)
		assert.Equal(t, values, got.Columns[0].Values)
	}

	integers := func(m memory.Allocator) arrow.Array {
		b := array.NewInt64Builder(m)
		b.AppendValues([]int64{1}, nil)
		return b.NewArray()
	}
	whole := arrow.Field{Name: "n", Type: arrow.PrimitiveTypes.Int64}
	_, err = arrowfile.Read(bytes.NewReader(other(t, whole, nil, integers)))
	assert.ErrorContains(t, err, `column "n" holds int64; only 64-bit floats can be read`)

	_, err = arrowfile.Read(bytes.NewReader(other(t, float, map[string]string{table.MetaWarnings: "oops"}, floats([]float64{1}, nil))))
	assert.ErrorContains(t, err, "rhotrace.warnings is not a JSON list")
}

// TestReadDamaged cuts files and streams at every byte and spoils every byte.
// A cut is always noticed. A spoilt byte may only change what that byte says.
func TestReadDamaged(t *testing.T) {
	for name, write := range formats {
		t.Run(name, func(t *testing.T) {
			var out bytes.Buffer
			require.NoError(t, write(&out, sample(20)))
			for cut := range out.Len() {
				_, err := arrowfile.Read(bytes.NewReader(out.Bytes()[:cut]))
				require.Error(t, err, "cut at byte %d of %d", cut, out.Len())
			}
			for i := range out.Len() {
				for _, spoil := range []byte{0x01, 0x80, 0xff} {
					spoilt := bytes.Clone(out.Bytes())
					spoilt[i] ^= spoil
					got, err := arrowfile.Read(bytes.NewReader(spoilt))
					if err == nil {
						require.NoError(t, got.Check())
					}
				}
			}
		})
	}
	_, err := arrowfile.Read(bytes.NewReader([]byte("time,signal\n0,1\n")))
	assert.ErrorContains(t, err, "neither an Arrow file nor an Arrow stream")
	_, err = arrowfile.Read(broken{})
	assert.ErrorContains(t, err, "the cable is out")
}

// broken neither takes nor gives anything.
type broken struct{}

func (broken) Write([]byte) (int, error) { return 0, errors.New("no space left") }
func (broken) Read([]byte) (int, error)  { return 0, errors.New("the cable is out") }

func TestWriteFails(t *testing.T) {
	for name, write := range formats {
		t.Run(name, func(t *testing.T) {
			assert.ErrorContains(t, write(broken{}, sample(100)), "no space left")
			assert.ErrorContains(t, write(broken{}, sample(0)), "no space left")

			twice := sample(1)
			twice.Add("signal", "1", "", []float64{1})
			assert.ErrorContains(t, write(&bytes.Buffer{}, twice), `two columns are named "signal"`)

			latin := sample(1)
			latin.Meta[table.MetaFile+"old.csv"] = "t in \xb5s\n"
			assert.ErrorContains(t, write(&bytes.Buffer{}, latin), `metadata "rhotrace.file.old.csv" is not UTF-8 text`)
			latin = sample(1)
			latin.Columns[1].Unit = "\xb5s"
			assert.ErrorContains(t, write(&bytes.Buffer{}, latin), `column "signal": its unit "\xb5s" is not UTF-8 text`)
		})
	}
}

// FuzzRead: any bytes are read or refused, never a panic and never gigabytes.
func FuzzRead(f *testing.F) {
	for _, write := range formats {
		for _, rows := range []int{0, 3} {
			var out bytes.Buffer
			require.NoError(f, write(&out, sample(rows)))
			f.Add(out.Bytes())
		}
	}
	f.Add([]byte("ARROW1\x00\x00"))
	f.Fuzz(func(t *testing.T, data []byte) {
		got, err := arrowfile.Read(bytes.NewReader(data))
		if err != nil {
			require.Nil(t, got)
			return
		}
		require.NoError(t, got.Check())
	})
}
