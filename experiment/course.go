package experiment

import (
	"fmt"
	"math"
	"os"
	"path/filepath"

	"gonum.org/v1/gonum/num/dual"

	"rhotrace/io/tracefile"
	"rhotrace/models"
)

// course is how a drive's Rabi frequency or a shift's size runs through a step.
type course struct {
	given         bool
	shape         models.Shape
	centre, width field
	rise, fall    field
	chirp         field
	file          *waveform
}

var noCourse = course{centre: none, width: none, rise: none, fall: none, chirp: none}

// shapes by their names in the file.
var shapes = []struct {
	name  string
	shape models.Shape
}{{"square", models.Square}, {"gaussian", models.Gaussian}, {"sech", models.Sech}, {"blackman", models.Blackman},
	{"sine-squared", models.SineSquared}, {"table", models.Sampled}}

func shapeNames() (names []string) {
	for _, s := range shapes {
		names = append(names, s.name)
	}
	return names
}

// course reads the keys of a shape from a step, or from the table of one block
// inside it.
func (r *reader) course(k *keys, c *course, name string, light bool) {
	*c = noCourse
	var shape, file string
	shapeNode := k.text("shape", &shape, "course of the Rabi frequency: square, gaussian, sech, blackman, sine-squared or table")
	find := func(key string) *node {
		if k.n == nil {
			return nil
		}
		return k.n.child(key)
	}
	c.shape = models.Square
	for _, s := range shapes {
		if s.name == shape {
			c.shape = s.shape
		}
	}
	if shapeNode != nil && shapeNode.kind == stringNode && c.shape == models.Square && shape != "square" {
		k.fail(shapeNode, "shape", "there is no shape %q%s", shape, didYouMean(shape, shapeNames()))
		return
	}
	bell := c.shape == models.Gaussian || c.shape == models.Sech
	k.only(bell, "centre", &c.centre, timeSpan.from(negative), "centre of a gaussian or sech, from the step's start; its middle unless given", "a gaussian or sech")
	width := timeSpan.above(0)
	if bell {
		width = width.need()
	}
	k.only(bell, "width", &c.width, width, "width: exp(−(t − centre)²/2 width²) or sech((t − centre)/width)", "a gaussian or sech")
	k.only(c.shape == models.Square, "rise", &c.rise, timeSpan, "rise from 0 to 100 % (sin² law), inside lasts", "a square")
	k.only(c.shape == models.Square, "fall", &c.fall, timeSpan, "fall from 100 % to 0 (sin² law), inside lasts", "a square")
	if light {
		k.number("chirp", &c.chirp, frequency, "total change of the frequency over the step, centred on the detuning")
	}
	fileNode := k.text("file", &file, "waveform for shape = \"table\": time, amplitude (1: the drive's Rabi frequency) and, if wanted, phase in rad; straight lines between samples, stretched to lasts")
	if r.listing {
		return
	}
	c.given = shapeNode != nil || c.rise != none || c.fall != none
	switch {
	case c.shape == models.Sampled && fileNode == nil:
		k.fail(shapeNode, "file", "is missing: name the file with the samples")
	case c.shape == models.Sampled:
		w, err := r.waveform(file)
		if err != nil {
			k.fail(fileNode, "file", "%v", err)
		}
		if w != nil && w.quadrature != nil && !light {
			k.fail(fileNode, "file", "has phases, which only light can have")
		}
		c.file = w
	case fileNode != nil:
		k.fail(find("file"), "file", "belongs to shape = \"table\"")
	}
}

const negative = -1e9 // s: a centre may lie before the step

// only reads a quantity that belongs to some shapes only.
func (k *keys) only(belongs bool, key string, dst *field, what kind, doc, to string) {
	if belongs || k.r.listing {
		k.number(key, dst, what, doc)
		return
	}
	if n := k.find(key, "", doc); n != nil {
		k.fail(n, key, "belongs to %s; say which shape in shape", to)
	}
}

// checkCourses holds what a shaped step needs.
func (r *reader) checkCourses(k *keys, s *step) {
	shaped := s.course.given && s.course.shape != models.Square
	for _, ch := range s.changes {
		shaped = shaped || ch.course.given && ch.course.shape != models.Square
	}
	switch {
	case s.ideal && (s.course.given || shaped):
		k.fail(nil, "", "is a rotation in no time and has no shape; let it last")
	case shaped && s.lasts == none && k.n.child("lasts") == nil:
		k.fail(nil, "lasts", "is missing: a shaped pulse needs its duration beside its area")
	case s.lasts == none && !s.ideal && s.courseOf(first(s.on)).given:
		k.fail(nil, "lasts", "is missing: a pulse with a rise or a fall needs its duration beside its area")
	case (s.course.given || s.course.chirp != none) && len(s.on) == 0:
		k.fail(nil, "", "has a shape or a chirp but no drive; name it in on")
	}
}

func first(list []int) int {
	if len(list) == 0 {
		return -1
	}
	return list[0]
}

// courseOf is the course of a drive in this step.
func (s *step) courseOf(drive int) *course {
	for i := range s.changes {
		ch := &s.changes[i]
		if ch.kind == driveBlock && ch.index == drive && ch.course.given {
			return &ch.course
		}
	}
	return &s.course
}

// chirpOf is the chirp of a drive in this step.
func (s *step) chirpOf(drive int) field {
	for _, ch := range s.changes {
		if ch.kind == driveBlock && ch.index == drive && ch.course.chirp != none {
			return ch.course.chirp
		}
	}
	return s.course.chirp
}

// pulses are the course with its numbers; nil for none.
func (c *course) pulses(x []dual.Number, lasts dual.Number) (pulse, quadrature *models.Pulse) {
	if !c.given {
		return nil, nil
	}
	p := &models.Pulse{Shape: c.shape, Lasts: lasts, Centre: dual.Scale(0.5, lasts)}
	if c.centre != none {
		p.Centre = x[c.centre]
	}
	if c.width != none {
		p.Width = x[c.width]
	}
	p.Rise, p.Fall = optional(x, c.rise, 0), optional(x, c.fall, 0)
	if c.file != nil {
		p.Times, p.Samples = c.file.times, c.file.inPhase
		if c.file.quadrature != nil {
			q := *p
			q.Samples = c.file.quadrature
			quadrature = &q
		}
	}
	return p, quadrature
}

// integralOf is the area of the first drive's pulse over 2π × its peak Rabi
// frequency, s.
func (s *step) integralOf(x []dual.Number) float64 {
	p, _ := s.courseOf(s.on[0]).pulses(x, x[s.lasts])
	if p == nil {
		return x[s.lasts].Real
	}
	return p.Integral()
}

// waveform is a file of samples.
type waveform struct {
	name                string
	text                []byte
	times               []float64 // fractions of the step, from 0 to 1
	inPhase, quadrature []float64 // quadrature nil: no phases
}

func (r *reader) waveform(name string) (*waveform, error) {
	path := name
	if !filepath.IsAbs(path) {
		path = filepath.Join(r.e.shape.dir, name)
	}
	if info, err := os.Stat(path); err == nil && info.Size() > 256<<20 {
		return nil, fmt.Errorf("%s is larger than 256 MiB", name)
	}
	data, err := tracefile.ReadFile(path)
	if err != nil {
		return nil, err
	}
	w := &waveform{name: name, text: data.Text}
	if n := len(data.Columns); n != 2 && n != 3 {
		return nil, fmt.Errorf("%s has %d columns; a waveform has time, amplitude and perhaps phase", name, n)
	}
	return w, w.fill(name, data)
}

func (w *waveform) fill(name string, data *tracefile.Trace) error {
	t := data.Columns[0].Values
	if len(t) < 2 {
		return fmt.Errorf("%s has %d samples; a waveform has at least two", name, len(t))
	}
	span := t[len(t)-1] - t[0]
	for i := range t {
		if i > 0 && !(t[i] > t[i-1]) {
			return fmt.Errorf("%s:%d: the times of a waveform must increase", name, data.Lines[i])
		}
		for _, c := range data.Columns {
			if v := c.Values[i]; v-v != 0 {
				return fmt.Errorf("%s:%d: column %q has no finite number; a waveform has no holes", name, data.Lines[i], c.Name)
			}
		}
		w.times = append(w.times, (t[i]-t[0])/span)
		amplitude := data.Columns[1].Values[i]
		if len(data.Columns) == 3 {
			sin, cos := math.Sincos(data.Columns[2].Values[i])
			w.quadrature = append(w.quadrature, amplitude*sin)
			amplitude *= cos
		}
		w.inPhase = append(w.inPhase, amplitude)
	}
	return nil
}

// filesBeside are the files whose contents the answer depends on, by name.
func (e *Experiment) filesBeside() map[string][]byte {
	files := map[string][]byte{}
	add := func(c *course) {
		if c.file != nil {
			files[c.file.name] = c.file.text
		}
	}
	for _, st := range e.shape.steps {
		add(&st.course)
		for i := range st.changes {
			add(&st.changes[i].course)
		}
	}
	return files
}
