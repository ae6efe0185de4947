package fitsutil

import (
	"os"

	"golang.org/x/sys/unix"
)

// beginWriteback asks the system to begin bringing to the disk what was written to f. Left
// alone it waits for half a minute, or until a tenth of the memory waits. Where it cannot
// be asked, nothing is lost but time.
func beginWriteback(f *os.File) {
	_ = unix.SyncFileRange(int(f.Fd()), 0, 0, unix.SYNC_FILE_RANGE_WRITE) // to the end
}
