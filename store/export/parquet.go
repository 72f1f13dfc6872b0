package export

import (
	"io"

	"fluxwarden/store"
	"fluxwarden/store/table"
)

// Parquet writes the rows asked for as one file, with the columns that have a value and the archive's metadata. All rows are in memory once.
func Parquet(w io.Writer, a *store.Archive, r Request) (rows int, err error) {
	if err := r.Check(); err != nil {
		return 0, err
	}
	s, err := r.look(a)
	if err != nil {
		return 0, err
	}
	var names []string
	for _, c := range s.columns {
		names = append(names, c.Name)
	}
	var parts []table.Part
	if err := r.each(a, names, func(rs *store.Rows) error {
		parts = append(parts, table.Part{Table: rs.Table, To: rs.Rows})
		return nil
	}); err != nil {
		return 0, err
	}
	t := table.Join(s.columns, parts)
	t.Meta = s.about()
	t.Meta["product"] = r.Product
	data, err := table.Encode(t)
	if err != nil {
		return 0, err
	}
	_, err = w.Write(data)
	return t.Rows, err
}
