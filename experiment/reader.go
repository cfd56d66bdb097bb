package experiment

// topKeys are the keys and tables of the file format at the top.
var topKeys = []string{"level", "drive", "decay", "dephasing", "shift", "step", "sequence", "start", "dial", "scan",
	"spread", "record", "readout", "trace", "unknown"}

// readFile reads the whole tree, each block after those that it names.
func (r *reader) readFile(root *node) {
	r.readTop(root)
	if r.err() != nil && !r.listing {
		return
	}
	r.readLevels()
	if !r.listing {
		r.checkBlockNames()
	}
	r.readDrives()
	r.readDecays()
	r.readDephasings()
	r.readShifts()
	r.readSteps()
	r.readSequence()
	r.readStart()
	r.readUserDials()
	r.readReadout()
	r.readSpreads()
	r.readRecord()
	r.readScans()
	r.readTraces()
	r.readUnknowns()
	if r.listing || r.err() != nil {
		return
	}
	r.checkEndless()
	r.turnUserDials()
	r.orderSources()
	if r.err() == nil {
		r.freeze()
	}
	if r.err() == nil {
		r.checkModel()
	}
}

func (r *reader) readTop(root *node) {
	s := r.e.shape
	k := r.keys(root, "")
	var format int
	n := k.whole("format", &format, number, "version of the file format: 1")
	k.text("title", &s.title, "title, for figures")
	k.setting("accuracy", &s.accuracy, number.from(1e-12).to(1e-2).or(1e-8), "largest error allowed on any element of ρ")
	k.done(topKeys...)
	switch {
	case r.listing:
	case root != nil && n == nil:
		r.fail(nil, "format", "is missing: write format = 1 in the first line")
	case format != 1:
		r.fail(n, "format", "is %d; this version reads format 1", format)
	}
}

// Manual lists every key of the file format.
func Manual() []Key {
	e := &Experiment{shape: &shape{index: map[string]int{}}}
	r := &reader{e: e, listing: true}
	r.readFile(nil)
	return r.manual
}
