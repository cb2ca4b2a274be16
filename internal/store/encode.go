package store

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"errors"
	"math"
	"time"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/track"
)

// contentForm is the stored form of a result. Its names never change.
type contentForm struct {
	definition.Result
	MeasuredText string `json:"measured_text"`
}

// encodeContent gives the stored form of a result, and its digest, from one encoding: the canonical object with the time
// as posted added at its end.
func encodeContent(r *definition.Result) (content, digest []byte) {
	canonical := r.Canonical()
	sum := sha256.Sum256(canonical)
	text, err := json.Marshal(r.MeasuredText)
	if err != nil {
		panic(err) // a text always encodes
	}
	content = append(canonical[:len(canonical)-1], `,"measured_text":`...)
	content = append(append(content, text...), '}')
	return content, sum[:]
}

func decodeContent(b []byte) (definition.Result, error) {
	var f contentForm
	if err := json.Unmarshal(b, &f); err != nil {
		return f.Result, errors.New("store: stored result: " + err.Error())
	}
	f.Result.MeasuredText = f.MeasuredText
	return f.Result, nil
}

// A stored point is a byte of flags; then, as the flags say, a count as its two numbers, or the length and the bytes of
// a material; then for each reading its bits and its bound.
const (
	pointRepeat   = 1
	pointCount    = 2
	pointMaterial = 4
)

func encodePoint(pt judge.Point, repeat bool) []byte {
	b := make([]byte, 1, 1+9*len(pt.Readings))
	if repeat {
		b[0] |= pointRepeat
	}
	if pt.Count != nil {
		b[0] |= pointCount
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(pt.Count.Nonconforming))
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(pt.Count.Inspected))
	}
	if pt.Material != "" { // at most definition.NameBytesMax, so its length fits a byte
		b[0] |= pointMaterial
		b = append(append(b, byte(len(pt.Material))), pt.Material...)
	}
	for i, x := range pt.Readings {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(x))
		bound := decimal.Measured
		if pt.Bounds != nil {
			bound = pt.Bounds[i]
		}
		b = append(b, byte(bound))
	}
	return b
}

var errStoredPoint = errors.New("store: stored point has an unknown form")

func decodePoint(b []byte) (pt judge.Point, repeat bool, err error) {
	if len(b) == 0 || b[0] > pointRepeat|pointCount|pointMaterial {
		return pt, false, errStoredPoint
	}
	flags, b := b[0], b[1:]
	float := func(b []byte) float64 { return math.Float64frombits(binary.LittleEndian.Uint64(b)) }
	if flags&pointCount != 0 {
		if len(b) < 16 {
			return pt, false, errStoredPoint
		}
		pt.Count = &chart.Count{Nonconforming: float(b), Inspected: float(b[8:])}
		b = b[16:]
	}
	if flags&pointMaterial != 0 {
		if len(b) < 1 || len(b) < 1+int(b[0]) {
			return pt, false, errStoredPoint
		}
		pt.Material, b = string(b[1:1+b[0]]), b[1+b[0]:]
	}
	if len(b)%9 != 0 {
		return pt, false, errStoredPoint
	}
	for i := 0; len(b) > 0; i, b = i+1, b[9:] {
		pt.Readings = append(pt.Readings, float(b))
		if b[8] != 0 && pt.Bounds == nil {
			pt.Bounds = make([]decimal.Bound, i, 1+len(b)/9+i)
		}
		if pt.Bounds != nil {
			pt.Bounds = append(pt.Bounds, decimal.Bound(b[8]))
		}
	}
	return pt, flags&pointRepeat != 0, nil
}

// keyTime reads the measured-at of an order key.
func keyTime(key []byte) time.Time {
	return time.UnixMicro(int64(binary.BigEndian.Uint64(key) ^ 1<<63)).UTC()
}

func refOf(id int64, key []byte) track.Ref { return track.Ref{ID: id, Key: key, At: keyTime(key)} }
