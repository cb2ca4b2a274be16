package store

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"errors"
	"math"
	"time"

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

// A stored point is a byte of flags, then for each reading its bits and its bound.
const pointRepeat = 1

func encodePoint(pt judge.Point, repeat bool) []byte {
	b := make([]byte, 1, 1+9*len(pt.Readings))
	if repeat {
		b[0] |= pointRepeat
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

func decodePoint(b []byte) (pt judge.Point, repeat bool, err error) {
	if len(b)%9 != 1 {
		return pt, false, errors.New("store: stored point has an unknown form")
	}
	repeat, b = b[0]&pointRepeat != 0, b[1:]
	for i := 0; len(b) > 0; i, b = i+1, b[9:] {
		pt.Readings = append(pt.Readings, math.Float64frombits(binary.LittleEndian.Uint64(b)))
		if b[8] != 0 && pt.Bounds == nil {
			pt.Bounds = make([]decimal.Bound, i, 1+len(b)/9+i)
		}
		if pt.Bounds != nil {
			pt.Bounds = append(pt.Bounds, decimal.Bound(b[8]))
		}
	}
	return pt, repeat, nil
}

// keyTime reads the measured-at of an order key.
func keyTime(key []byte) time.Time {
	return time.UnixMicro(int64(binary.BigEndian.Uint64(key) ^ 1<<63)).UTC()
}

func refOf(id int64, key []byte) track.Ref { return track.Ref{ID: id, Key: key, At: keyTime(key)} }
