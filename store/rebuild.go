package store

import (
	"encoding/json"
	"errors"
	"io/fs"
	"path"
	"strconv"
	"strings"

	"fluxwarden/store/table"
)

// adopt builds the books anew from the tree, for stations of partitions whose commit records and manifests are gone.
func (a *Archive) adopt() error {
	lost, err := a.unknownStations()
	if err != nil || len(lost) == 0 {
		return err
	}
	for i, p := range a.parts {
		if p.have || len(p.files) > 0 {
			continue
		}
		p.mu.Lock()
		err := a.rebuildPartition(i, p)
		if err == nil && len(p.files) > 0 {
			p.trouble = append(p.trouble, Finding{checkpointPath(i), "missing, and so are the records; the books were built anew from the tree", true})
		}
		p.mu.Unlock()
		if err != nil {
			return err
		}
		a.knowStations(i)
	}
	return nil
}

// unknownStations lists the stations that have a folder in the tree and are in no book.
func (a *Archive) unknownStations() ([]string, error) {
	var list []string
	for _, t := range []string{TableRaw, TableMinutes, TableFaults, TableNotes} {
		entries, err := a.fs.ReadDir(a.path(t))
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return nil, err
		}
		for _, e := range entries {
			if s, ok := strings.CutPrefix(e.Name, "station="); ok && e.Dir && !a.knows(s) {
				list = append(list, s)
			}
		}
	}
	return list, nil
}

// rebuildPartition takes the files of the tree whose metadata names the partition.
func (a *Archive) rebuildPartition(i int, p *partition) error {
	a.treeOnce.Do(func() { a.tree, a.treeErr = a.walk() })
	if a.treeErr != nil {
		return a.treeErr
	}
	for _, f := range a.tree {
		if f.partition == i {
			p.add(f.File)
		}
	}
	return nil
}

type treeFile struct {
	File
	partition int
}

// walk lists the published files with what their metadata says; what is not ours is left out and named by Verify.
func (a *Archive) walk() ([]treeFile, error) {
	var list []treeFile
	partitions := map[string]int{}
	var states []File
	err := a.eachFile(func(name, tableName, station string) error {
		if tableName == TableState {
			if period, ok := strings.CutPrefix(path.Base(path.Dir(name)), "month="); ok && strings.HasSuffix(name, ".jsonl") {
				states = append(states, File{Path: name, Table: TableState, Station: station, Period: period})
			}
			return nil
		}
		f, ok := a.adoptFile(name, tableName, station)
		if ok {
			list = append(list, f)
			partitions[station] = f.partition
		}
		return nil
	})
	for _, s := range states {
		if i, ok := partitions[s.Station]; ok {
			list = append(list, treeFile{s, i})
		}
	}
	return list, err
}

func (a *Archive) adoptFile(name, tableName, station string) (treeFile, bool) {
	b, err := a.readBytes(File{Path: name, Table: tableName})
	if err != nil {
		return treeFile{}, false
	}
	meta, rows, err := table.Meta(strings.NewReader(string(b)), int64(len(b)))
	if err != nil || meta["station"] != station || meta["table"] != tableName {
		return treeFile{}, false
	}
	i, err := strconv.Atoi(meta["partition"])
	if err != nil || i < 0 || i >= Partitions {
		return treeFile{}, false
	}
	f := File{Path: name, SHA256: sha(b), Bytes: int64(len(b)), Rows: rows, Table: tableName, Station: station, Period: meta["period"],
		Sealed: meta["sealed"] == "true"}
	_ = json.Unmarshal([]byte(meta["row_digests"]), &f.Digests)
	f.Digests = nil
	return treeFile{f, i}, true
}

// eachFile calls f for each file under the published tree.
func (a *Archive) eachFile(f func(name, tableName, station string) error) error {
	for _, t := range tables {
		if err := a.walkDir(t, func(name string) error {
			first, _, inside := strings.Cut(strings.TrimPrefix(name, t+"/"), "/")
			station := ""
			if inside {
				station, _ = strings.CutPrefix(first, "station=")
			}
			return f(name, t, station)
		}); err != nil {
			return err
		}
	}
	return nil
}

func (a *Archive) walkDir(dir string, f func(name string) error) error {
	list, err := a.fs.ReadDir(a.path(dir))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	for _, e := range list {
		name := path.Join(dir, e.Name)
		if e.Dir {
			err = a.walkDir(name, f)
		} else {
			err = f(name)
		}
		if err != nil {
			return err
		}
	}
	return nil
}
