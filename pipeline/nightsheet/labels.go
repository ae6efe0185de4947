package nightsheet

import (
	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/nightsheet/typeface"
)

// labelPoints is the size of words in drawings.
const labelPoints = 7.2

func coord(x float64) string { return drawing.Coord(x) }

// box is a rectangle that words take, points.
type box struct{ x0, y0, x1, y1 float64 }

// labels keeps words of a drawing apart.
type labels struct {
	face  *typeface.Face
	taken []box
}

func newLabels(face *typeface.Face) *labels { return &labels{face: face} }

// box is that of words about a middle.
func (l *labels) box(words string, x, y float64) box {
	half := l.face.Width(words, labelPoints)/2 + 1
	return box{x - half, y - labelPoints*0.6, x + half, y + labelPoints*0.6}
}

func (l *labels) free(b box) bool {
	for _, t := range l.taken {
		if b.x0 < t.x1 && t.x0 < b.x1 && b.y0 < t.y1 && t.y0 < b.y1 {
			return false
		}
	}
	return true
}

func (l *labels) take(b box) { l.taken = append(l.taken, b) }
