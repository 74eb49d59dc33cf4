package pdf

import (
	"encoding/binary"
	"math"
	"sync"
)

var profile = sync.OnceValue(srgb)

// srgb builds a colour profile of sRGB: a matrix and one curve for the three colours.
//
// The curve is that of IEC 61966-2-1; the primaries are those of ITU-R BT.709 adapted
// to D50 by the linear Bradford transform, as sRGB profiles carry them (from memory).
// The layout is that of ICC.1:2001-04, a version 2 display profile.
func srgb() []byte {
	const points = 1024
	curve := make([]byte, 12+2*points)
	copy(curve, "curv")
	binary.BigEndian.PutUint32(curve[8:], points)
	for i := range points {
		v := float64(i) / (points - 1)
		if v <= 0.04045 {
			v /= 12.92
		} else {
			v = math.Pow((v+0.055)/1.055, 2.4)
		}
		binary.BigEndian.PutUint16(curve[12+2*i:], uint16(math.Round(v*65535)))
	}
	const title = "sRGB IEC61966-2.1\x00"
	desc := make([]byte, 12+len(title)+4+4+2+1+67)
	copy(desc, "desc")
	binary.BigEndian.PutUint32(desc[8:], uint32(len(title)))
	copy(desc[12:], title)
	right := append([]byte("text\x00\x00\x00\x00"), "No copyright, use freely\x00"...)
	xyz := func(x, y, z float64) []byte {
		b := make([]byte, 20)
		copy(b, "XYZ ")
		for i, v := range []float64{x, y, z} {
			binary.BigEndian.PutUint32(b[8+4*i:], uint32(int32(math.Round(v*65536))))
		}
		return b
	}
	tags := []struct {
		name string
		body []byte
	}{
		{"desc", desc},
		{"cprt", right},
		{"wtpt", xyz(0.96420, 1, 0.82491)},
		{"rXYZ", xyz(0.43607, 0.22249, 0.01392)},
		{"gXYZ", xyz(0.38515, 0.71687, 0.09708)},
		{"bXYZ", xyz(0.14307, 0.06061, 0.71410)},
		{"rTRC", curve}, {"gTRC", nil}, {"bTRC", nil}, // the three share one curve
	}
	head := make([]byte, 128)
	copy(head[8:], []byte{2, 0x10, 0, 0})
	copy(head[12:], "mntrRGB XYZ ")
	for i, v := range []uint16{2020, 1, 1, 0, 0, 0} {
		binary.BigEndian.PutUint16(head[24+2*i:], v)
	}
	copy(head[36:], "acsp")
	for i, v := range []float64{0.96420, 1, 0.82491} {
		binary.BigEndian.PutUint32(head[68+4*i:], uint32(math.Round(v*65536)))
	}
	table := binary.BigEndian.AppendUint32(nil, uint32(len(tags)))
	at := len(head) + 4 + 12*len(tags)
	var body []byte
	var from, size int
	for _, t := range tags {
		if t.body != nil {
			from, size = at+len(body), len(t.body)
			body = append(body, t.body...)
			for len(body)%4 != 0 {
				body = append(body, 0)
			}
		}
		table = append(table, t.name...)
		table = binary.BigEndian.AppendUint32(table, uint32(from))
		table = binary.BigEndian.AppendUint32(table, uint32(size))
	}
	profile := append(append(head, table...), body...)
	binary.BigEndian.PutUint32(profile, uint32(len(profile)))
	return profile
}
