package reduce

import (
	"regexp"
	"strconv"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func drawShape(t *rapid.T) shape {
	s := shape{
		columns: rapid.IntRange(8, 5000).Draw(t, "columns"), rows: rapid.IntRange(8, 5000).Draw(t, "rows"),
		elements: rapid.IntRange(1, 1000).Draw(t, "elements"), voxels: rapid.IntRange(1, 4000).Draw(t, "voxels"),
		margin: rapid.IntRange(7, 16).Draw(t, "margin"), uniform: rapid.Bool().Draw(t, "uniform"),
		cube: rapid.Bool().Draw(t, "cube"),
	}
	s.slots = s.elements + rapid.IntRange(0, 100).Draw(t, "dark")
	s.elementCube = !s.cube || rapid.Bool().Draw(t, "element cube")
	return s
}

// What strips, window and cube ask for, counted here buffer by buffer, is never
// more than is given; a refusal names a memory that is enough.
func TestHeightsFitTheMemory(t *testing.T) {
	advice := regexp.MustCompile(`give at least (\d+) MiB`)
	rapid.Check(t, func(t *rapid.T) {
		s := drawShape(t)
		memory := int64(rapid.IntRange(64, 8<<10).Draw(t, "MiB")) << 20
		h, err := s.heights(memory)
		if err != nil {
			found := advice.FindStringSubmatch(err.Error())
			require.Len(t, found, 2, err)
			mib, _ := strconv.ParseInt(found[1], 10, 64)
			memory = mib << 20
			h, err = s.heights(memory)
			require.NoError(t, err)
		}
		require.GreaterOrEqual(t, h.strip, 1)
		require.LessOrEqual(t, h.strip, s.rows)
		if s.cube {
			require.GreaterOrEqual(t, h.out, 1)
		}
		require.LessOrEqual(t, buffers(s, h), memory-runtimeBytes)
		more, err := s.heights(2 * memory)
		require.NoError(t, err)
		require.GreaterOrEqual(t, more.out, h.out)
		require.LessOrEqual(t, buffers(s, more), 2*memory-runtimeBytes)
	})
}

// buffers counts the bytes of the large buffers.
func buffers(s shape, h heights) int64 {
	row := int64(s.columns) * 4
	variances := int64(1)
	if !s.uniform {
		variances = int64(s.elements)
	}
	decoded := row*(int64(s.elements)+variances+2) + row // two kinds of flags of two bytes
	total := 2 * int64(h.strip) * int64(s.slots) * row   // one read, one worked on
	if s.elementCube {
		planes := int64(s.slots) + 1
		if !s.uniform {
			planes = 2 * int64(s.slots)
		}
		total += int64(h.strip) * planes * row
	}
	window := int64(h.strip)
	if s.cube {
		window += int64(s.margin + h.out)
		total += 2 * int64(h.out) * int64(s.elements) * int64(s.voxels) * (4 + 4 + 2 + 4)
	}
	return total + window*decoded
}
