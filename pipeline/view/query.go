package view

import (
	"errors"
	"fmt"
	"math"
	"net/url"
	"slices"
	"strconv"
	"strings"
)

// mostQuery bytes are read of a query: a polygon of mostCorners with all digits, and more.
const mostQuery = 8 << 10

// query is what a request asks. It keeps the first thing that is wrong.
type query struct {
	values url.Values
	known  []string
	err    error
}

// parseQuery refuses what is no list of names with one value each.
func parseQuery(raw string) *query {
	q := new(query)
	if len(raw) > mostQuery {
		q.fail("the query has %d characters, of which %d are read; ask for less", len(raw), mostQuery)
		return q
	}
	var err error
	if q.values, err = url.ParseQuery(raw); err != nil {
		q.fail("the query cannot be read; write name=value, joined by &")
	}
	for name, all := range q.values {
		if len(all) != 1 {
			q.fail("%.40q is given %d times; give it once", name, len(all))
		}
	}
	return q
}

func (q *query) fail(format string, args ...any) {
	if q.err == nil {
		q.err = fmt.Errorf(format, args...)
	}
}

// text of a parameter, empty where it is not given.
func (q *query) text(name string) string {
	q.known = append(q.known, name)
	return q.values.Get(name)
}

func (q *query) has(name string) bool { return q.values.Has(name) }

// number of a parameter that must be given.
func (q *query) number(name string) float64 {
	text := q.text(name)
	x, err := strconv.ParseFloat(text, 64)
	if err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
		q.fail("%s=%.40q is no number", name, text)
		return 0
	}
	return x
}

// numberOr is number, or other where it is not given.
func (q *query) numberOr(name string, other float64) float64 {
	if !q.has(name) {
		q.known = append(q.known, name)
		return other
	}
	return q.number(name)
}

// index of a parameter from 0 to n-1, or other where it is not given.
func (q *query) index(name string, n, other int) int {
	text := q.text(name)
	if text == "" && !q.has(name) {
		return other
	}
	i, err := strconv.Atoi(text)
	if err != nil || i < 0 || i >= n {
		q.fail("%s=%.40q is no number from 0 to %d", name, text, n-1)
		return 0
	}
	return i
}

// yes tells whether a parameter is 1; 0 is as good as none.
func (q *query) yes(name string) bool {
	text := q.text(name)
	if !slices.Contains([]string{"", "0", "1"}, text) {
		q.fail("%s=%.40q is neither 0 nor 1", name, text)
	}
	return text == "1"
}

// numbers of a list with commas.
func (q *query) numbers(name string, most int) []float64 {
	text := q.text(name)
	parts := strings.Split(text, ",")
	if len(parts) > most {
		q.fail("%s has %d numbers; at most %d are taken", name, len(parts), most)
		return nil
	}
	all := make([]float64, len(parts))
	for i, part := range parts {
		x, err := strconv.ParseFloat(part, 64)
		if err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
			q.fail("%s=%.40q is no list of numbers with commas", name, text)
			return nil
		}
		all[i] = x
	}
	return all
}

// done gives what is wrong: the first of it, or a name that means nothing here.
func (q *query) done() error {
	if q.err != nil {
		return q.err
	}
	for name := range q.values {
		if !slices.Contains(q.known, name) {
			return fmt.Errorf("%.40q means nothing here; it takes %s", name, strings.Join(q.known, ", "))
		}
	}
	return nil
}

// errBand says that a band is none.
var errBand = errors.New("from lies behind to; give the first channel of the band and the last")

// band is from..to, all channels where they are not given.
func (q *query) band(channels int) (from, to int) {
	from, to = q.index("from", channels, 0), q.index("to", channels, channels-1)
	if from > to && q.err == nil {
		q.err = errBand
	}
	return from, to
}
