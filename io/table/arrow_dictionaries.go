package table

// arrowDictionaries holds the dictionaries of an Arrow file as far as it was
// read: a later batch may replace one, or add to it.
type arrowDictionaries struct {
	numbers map[int64][]float64
	texts   map[int64]*arrowTexts
	views   []arrowView // per sink: what it has asked of its dictionary
}

// arrowTexts is a dictionary of text. A missing value is an empty one.
type arrowTexts struct {
	bytes []byte
	ends  []uint32 // per value: where it ends in bytes
}

// arrowView is one column's view of a dictionary of text: an entry gets its
// code when the first row uses it, since a dictionary may hold more than the
// rows do.
type arrowView struct {
	of    *arrowTexts
	codes []int32
}

// Limits of a dictionary, which is held whole.
const (
	dictionaryBytes   = 64 << 20 // of text
	dictionaryEntries = 1 << 20  // or as many as rows need, if that is more
)

func newArrowDictionaries(sinks int) *arrowDictionaries {
	return &arrowDictionaries{numbers: map[int64][]float64{}, texts: map[int64]*arrowTexts{}, views: make([]arrowView, sinks)}
}

// claim refuses a dictionary that cannot be held, before it is.
func (d *arrowDictionaries) claim(b arrowBatch, l *batchLayout, f arrowField, tableRows int64) error {
	need := b.rows
	if w := int64(f.width()); w > 0 {
		need = b.rows * w / 8
	}
	switch most := max(dictionaryEntries, 2*tableRows); {
	case l.codec == arrowRaw && need > b.size, tooDense(need, b.size, false):
		return damagedf("a dictionary claims %d values in %d bytes", b.rows, b.size)
	case b.rows > most:
		return refusef("its dictionary has %s values, and at most %s are read: write the column without those that no row uses", grouped(b.rows), grouped(most))
	}
	return nil
}

func (d *arrowDictionaries) readNumbers(b arrowBatch, l *batchLayout, f arrowField, r *bufferReader) error {
	values := make([]float64, b.rows)
	if _, err := r.column(l, l.fields[0], f, values, 0, nil); err != nil {
		return err
	}
	if b.delta {
		values = append(append([]float64(nil), d.numbers[b.id]...), values...)
	}
	d.numbers[b.id] = values
	return nil
}

func (d *arrowDictionaries) readText(b arrowBatch, l *batchLayout, f arrowField, r *bufferReader) error {
	words := &arrowTexts{}
	if before := d.texts[b.id]; b.delta && before != nil {
		words.bytes = append(words.bytes, before.bytes...)
		words.ends = append(words.ends, before.ends...)
	}
	var fault error
	err := r.eachText(l, l.fields[0], f, int(b.rows), func(_ int, word []byte) bool {
		if len(words.bytes)+len(word) > dictionaryBytes {
			fault = refusef("its dictionary has more than %s of text, which is not read: write the column without the values that no row uses", byteSize(dictionaryBytes))
			return false
		}
		words.bytes = append(words.bytes, word...)
		words.ends = append(words.ends, uint32(len(words.bytes)))
		return true
	})
	if fault != nil {
		return fault
	}
	d.texts[b.id] = words
	return err
}

// text returns a sink's view of its dictionary; nil if its text stands in the
// rows, or the dictionary has not come.
func (d *arrowDictionaries) text(f arrowField, sink int) *arrowView {
	words := d.texts[f.id]
	if !f.dictionary || words == nil {
		return nil
	}
	v := &d.views[sink]
	if v.of != words {
		*v = arrowView{of: words, codes: make([]int32, len(words.ends))}
		for i := range v.codes {
			v.codes[i] = notAsked
		}
	}
	return v
}

// code returns the code of an entry that the table row given uses.
func (v *arrowView) code(k uint64, t *texts, row int64) int32 {
	if v.codes[k] == notAsked {
		start := uint32(0)
		if k > 0 {
			start = v.of.ends[k-1]
		}
		v.codes[k] = t.add(v.of.bytes[start:v.of.ends[k]], row)
	}
	return v.codes[k]
}
