package fitsutil

import (
	"fmt"
	"strconv"
	"strings"
	"sync"
)

// chunkBytes is the size of a conversion buffer: it stays in the L2 cache
// between conversion, sum and write, and is large enough that the call of the
// system costs little. A multiple of 8, the largest sample.
const chunkBytes = 256 << 10

// chunks lends the buffers to writers and readers, so that a strip allocates
// none.
var chunks = sync.Pool{New: func() any {
	buffer := make([]byte, chunkBytes)
	return &buffer
}}

// layout is a file under construction: its HDUs lie one after the other, data
// are written at their offsets in any order, headers last, when the sums of
// the data are known.
type layout struct {
	part *partFile
	hdus []*pending
	end  int64 // where the next HDU starts
}

// pending is an HDU of a layout.
type pending struct {
	header   *Header // complete but for the values of CHECKSUM and DATASUM
	headerAt int64
	dataAt   int64
	dataSize int64 // without the fill of the last block

	mu  sync.Mutex
	sum uint32 // of the data written so far
}

// add gives an HDU its place behind the others. header must have its CHECKSUM
// and DATASUM cards already (see addSumCards), so that its length is final.
func (l *layout) add(header *Header, dataSize int64) (*pending, error) {
	bytes, err := header.encode()
	if err != nil {
		return nil, err
	}
	hdu := &pending{header: header, headerAt: l.end, dataAt: l.end + int64(len(bytes)), dataSize: dataSize}
	l.end = hdu.dataAt + dataSize + padding(dataSize)
	l.hdus = append(l.hdus, hdu)
	return hdu, nil
}

// writeData writes bytes at an offset of the HDU's data and adds them to its
// sum. Goroutine-safe for bytes that do not overlap.
func (l *layout) writeData(hdu *pending, offset int64, bytes []byte) error {
	sum := sumRun(offset, bytes)
	hdu.mu.Lock()
	hdu.sum = addSums(hdu.sum, sum)
	hdu.mu.Unlock()
	return l.part.traffic.writing(len(bytes), func() error {
		_, err := l.part.file.WriteAt(bytes, hdu.dataAt+offset)
		return err
	})
}

// writeSamples writes data[from:from+count] from an offset, in samples, of the
// HDU's data, through a borrowed buffer.
func (l *layout) writeSamples(hdu *pending, kind sampleType, offset int64, data any, from, count int) error {
	buffer := getBuffer()
	defer putBuffer(buffer)
	size := kind.size()
	for count > 0 {
		n := min(count, chunkBytes/size)
		bytes := (*buffer)[:n*size]
		putSamples(bytes, data, from, from+n)
		if err := l.writeData(hdu, offset*int64(size), bytes); err != nil {
			return err
		}
		offset, from, count = offset+int64(n), from+n, count-n
	}
	return nil
}

// finish writes the headers of all HDUs and commits the file. The fill between
// the HDUs is already there: a file reads as zeros where nothing was written.
func (l *layout) finish() error {
	for _, hdu := range l.hdus {
		bytes, err := sealHeader(hdu.header, hdu.sum)
		if err != nil {
			return err
		}
		if int64(len(bytes)) != hdu.dataAt-hdu.headerAt {
			panic("internal error: a header changed its length")
		}
		if _, err := l.part.file.WriteAt(bytes, hdu.headerAt); err != nil {
			return err
		}
	}
	return l.part.commit()
}

// reserve allocates the bytes of the file from an offset up to its end.
func (l *layout) reserve(from int64) error {
	return preallocate(l.part.file, from, l.end)
}

// addSumCards appends CHECKSUM and DATASUM with placeholders as long as their
// values.
func addSumCards(h *Header) {
	h.push(sumCard("CHECKSUM", strings.Repeat("0", 16), "HDU checksum"))
	h.push(sumCard("DATASUM", "0", "data unit checksum"))
}

// sumCard is a card of a sum, its comment at column 32 whatever the value.
func sumCard(key, value, comment string) entry {
	quoted := fmt.Sprintf("'%-8s'", value)
	return entry{
		card: Card{Key: key, Value: value, Comment: comment},
		raw:  fmt.Appendf(nil, "%-80.80s", fmt.Sprintf("%-8s= %-20s / %s", key, quoted, comment)),
	}
}

// sealHeader gives the bytes of a header with the CHECKSUM and DATASUM that go
// with data of the sum dataSum (section 4.4.2.7). Both cards must exist; they
// keep their place and their comments, which hold no date: the same HDU has
// the same bytes.
func sealHeader(h *Header, dataSum uint32) ([]byte, error) {
	set := func(key, value string) {
		at := &h.entries[h.index[key]]
		*at = sumCard(key, value, at.card.Comment)
	}
	set("DATASUM", strconv.FormatUint(uint64(dataSum), 10))
	set("CHECKSUM", strings.Repeat("0", 16))
	bytes, err := h.encode()
	if err != nil {
		return nil, err
	}
	set("CHECKSUM", encodeChecksum(addSums(dataSum, sumRun(0, bytes))))
	return h.encode()
}

// createLayout opens the temporary file of a new FITS file.
func createLayout(path string) (*layout, error) {
	part, err := createPart(path)
	if err != nil {
		return nil, err
	}
	return &layout{part: part}, nil
}

// structural tells whether a card describes the structure of an HDU, which is
// made anew from what is written and never copied from a caller's header.
func structural(key string) bool {
	switch key {
	case "SIMPLE", "XTENSION", "BITPIX", "NAXIS", "PCOUNT", "GCOUNT", "GROUPS", "EXTEND", "BSCALE", "BZERO",
		"TFIELDS", "THEAP", "CHECKSUM", "DATASUM", "LONGSTRN", "END",
		// One that continues nothing would continue whatever comes to lie before it.
		continueKey:
		return true
	}
	return numbered(key, "NAXIS")
}

// numbered tells whether key is stem followed by a number.
func numbered(key, stem string) bool {
	digits, found := strings.CutPrefix(key, stem)
	return found && digits != "" && onlyBytes(digits, "0123456789")
}

// addExtra appends the caller's cards that keep accepts, with the bytes they
// were read with, and the LONGSTRN card that announces long strings.
func addExtra(h, extra *Header, keep func(key string) bool) error {
	if extra != nil {
		if err := extra.Err(); err != nil {
			return err
		}
		for _, e := range extra.entries {
			if keep(foldKey(e.card.Key)) {
				h.push(e)
			}
		}
	}
	for _, e := range h.entries {
		if e.hasValue() && len(e.raw) > cardSize {
			return h.Set("LONGSTRN", "OGIP 1.0", "long strings go on in CONTINUE cards")
		}
	}
	return nil
}

// closedError is the answer of a writer that was committed or aborted.
func closedError(path string) error {
	return fileError(path, ErrClosed, "was committed or aborted already", "create it anew")
}

// inFile gives an error without a file the name of the file.
func inFile(path string, err error) error {
	if known, ok := err.(*Error); ok && known.File == "" {
		named := *known
		named.File = path
		return &named
	}
	return err
}

// checkNames refuses names that a reader could not tell apart.
func checkNames(path string, names []string) error {
	seen := map[string]bool{}
	for _, name := range names {
		folded := strings.ToUpper(strings.TrimSpace(name))
		if folded != "" && seen[folded] {
			return fileError(path, ErrStructure, fmt.Sprintf("two HDUs are to be named %s", name), "name each once")
		}
		seen[folded] = true
	}
	return nil
}
