package main

import (
	"bufio"
	"errors"
	"os"
	"strconv"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// writeCSVs writes the readings, and beside them what each instrument should have said.
func (s *simulation) writeCSVs(readingsPath, valuesPath string) (err error) {
	readings, err := os.Create(readingsPath)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, readings.Close()) }()
	values, err := os.Create(valuesPath)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, values.Close()) }()
	r, v := bufio.NewWriter(readings), bufio.NewWriter(values)
	channels := s.channels()
	var line []byte
	line = append(line, "time"...)
	for _, c := range channels {
		line = append(append(line, ','), c...)
	}
	writeLine(r, line)
	line = append(line[:0], "time"...)
	for i := range s.station.Rules().Instruments {
		line = append(append(line, ','), s.station.Rules().Instruments[i].ID...)
	}
	writeLine(v, line)
	for at := s.first(); s.within(at); at += s.station.Interval() {
		reading := s.station.Reading(at)
		if len(reading.Values) > 0 {
			writeLine(r, readingLine(line[:0], &reading, channels))
		}
		line = wire.AppendTime(line[:0], at)
		for _, x := range s.station.True(at) {
			line = strconv.AppendFloat(append(line, ','), x, 'f', 3, 64)
		}
		writeLine(v, line)
	}
	return errors.Join(r.Flush(), v.Flush())
}

// writeLine leaves errors to the writer, which keeps the first for its Flush.
func writeLine(w *bufio.Writer, line []byte) {
	_, _ = w.Write(line)
	_ = w.WriteByte('\n')
}

// channels are the columns: what a record of the sound station holds.
func (s *simulation) channels() []string {
	sound := s.station.Sound(s.first())
	names := make([]string, len(sound.Values))
	for i := range sound.Values {
		names[i] = sound.Values[i].Channel
	}
	return names
}

// readingLine writes the means; a channel that is not sent is left empty.
func readingLine(line []byte, r *minute.Reading, channels []string) []byte {
	line = wire.AppendTime(line, r.At)
	next := 0
	for _, c := range channels {
		line = append(line, ',')
		if next < len(r.Values) && r.Values[next].Channel == c {
			line = strconv.AppendFloat(line, r.Values[next].Mean, 'f', -1, 64)
			next++
		}
	}
	return line
}

// first is the stamp of the first record whose time begins in the span; within says whether one still does.
func (s *simulation) first() minute.Stamp {
	first := s.station.Next(s.from)
	if s.station.Rules().Time.LabelEnd {
		first += s.station.Interval()
	}
	return first
}

func (s *simulation) within(at minute.Stamp) bool {
	if s.station.Rules().Time.LabelEnd {
		at -= s.station.Interval()
	}
	return at < s.to
}
