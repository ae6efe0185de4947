package nightsheet

import (
	"fmt"

	"mirrorloom/pipeline/sequence"
)

// Loading says how the masks get into the device.
type Loading struct {
	Folder  string `json:"folder"`
	Files   int    `json:"files"`
	Columns int    `json:"columns"`
	Rows    int    `json:"rows"`
	// First and Last are the MASKIDs of the first and the last step.
	First string `json:"first_maskid"`
	Last  string `json:"last_maskid"`
	// Words say what to do.
	Words string `json:"how"`
}

func loadingOf(s *sequence.Sequence) Loading {
	d := s.Profile.DMD
	l := Loading{Folder: "masks", Columns: d.Columns, Rows: d.Rows}
	seen := map[string]bool{}
	for _, st := range s.Steps {
		seen[st.MaskID] = true
	}
	l.Files = len(seen)
	if n := len(s.Steps); n > 0 {
		l.First, l.Last = s.Steps[0].MaskID, s.Steps[n-1].MaskID
	}
	l.Words = fmt.Sprintf("Load from the folder %s, for each step in order, the file MASKID.png that column MASKID of table STEPS in sequence.fits (steps_in_order of %s) names, from %s (step 1) to %s (step %d): %d files of %d x %d mirrors, 1 bit each, white for on, the PNG's top left mirror the device's column 0 of row 0. Write STEP and MASKID into each frame's header.",
		l.Folder, JSONFile, l.First, l.Last, len(s.Steps), l.Files, l.Columns, l.Rows)
	return l
}
