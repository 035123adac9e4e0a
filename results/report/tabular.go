package report

import "slices"

// tabular is a table for the page: the first cell of a row is its header.
type tabular struct {
	Caption string
	Columns []column
	Rows    [][]string
	Notes   []string
}

// column is a column's head; numbers stand at its right edge.
type column struct {
	Name   string
	Number bool
}

// columns builds column heads; a name that starts with # holds numbers.
func columns(names ...string) []column {
	out := make([]column, len(names))
	for i, n := range names {
		if n[0] == '#' {
			out[i] = column{n[1:], true}
		} else {
			out[i] = column{n, false}
		}
	}
	return out
}

// drop takes column k out.
func (t *tabular) drop(k int) {
	t.Columns = slices.Delete(t.Columns, k, k+1)
	for i := range t.Rows {
		t.Rows[i] = slices.Delete(t.Rows[i], k, k+1)
	}
}
