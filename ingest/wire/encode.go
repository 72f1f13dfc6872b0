package wire

import (
	"math"
	"strconv"

	"fluxwarden/qc/minute"
)

// EncodeJSON appends readings as the payload that DecodeJSON reads: an object for one, an array otherwise.
func EncodeJSON(dst []byte, readings []minute.Reading) []byte {
	if len(readings) == 1 {
		return appendReading(dst, &readings[0])
	}
	dst = append(dst, '[')
	for i := range readings {
		if i > 0 {
			dst = append(dst, ',')
		}
		dst = appendReading(dst, &readings[i])
	}
	return append(dst, ']')
}

func appendReading(dst []byte, r *minute.Reading) []byte {
	dst = append(dst, `{"t":"`...)
	dst = AppendTime(dst, r.At)
	dst = append(dst, `","x":{`...)
	for i, v := range r.Values {
		if i > 0 {
			dst = append(dst, ',')
		}
		dst = append(append(append(dst, '"'), v.Channel...), `":`...)
		dst = appendValue(dst, v.Value)
	}
	return append(dst, "}}"...)
}

// single says whether a value is that of one sample, without statistics of its own.
func single(v *minute.Value) bool {
	return v.N == 1 && math.IsNaN(v.SD) && v.Min == v.Mean && v.Max == v.Mean
}

func appendValue(dst []byte, v minute.Value) []byte {
	if single(&v) {
		return strconv.AppendFloat(dst, v.Mean, 'g', -1, 64)
	}
	dst = strconv.AppendFloat(append(dst, `{"mean":`...), v.Mean, 'g', -1, 64)
	for _, part := range [...]struct {
		key string
		v   float64
	}{{"sd", v.SD}, {"min", v.Min}, {"max", v.Max}} {
		if !math.IsNaN(part.v) {
			dst = append(append(append(dst, `,"`...), part.key...), `":`...)
			dst = strconv.AppendFloat(dst, part.v, 'g', -1, 64)
		}
	}
	dst = strconv.AppendInt(append(dst, `,"n":`...), int64(v.N), 10)
	return append(dst, '}')
}
