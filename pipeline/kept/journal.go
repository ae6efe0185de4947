package kept

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"os"
)

// Journal is a file of records that grows at its end.
type Journal struct {
	file *os.File
	end  int64
}

// recordHead is the length of a record and its CRC-32C, four bytes each.
const recordHead = 8

// longestRecord bounds what a damaged length may ask for.
const longestRecord = 256 << 20

// CreateJournal begins an empty one in the place of what is there.
func CreateJournal(path string) (*Journal, error) {
	file, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE|os.O_TRUNC, 0o666)
	if err != nil {
		return nil, fmt.Errorf("journal: %w", err)
	}
	return &Journal{file: file}, nil
}

// OpenJournal goes on with a journal: each is called with its records in their order,
// which it must not keep, and tells whether to go on. What follows the first that is torn, changed
// or not wanted is cut off.
func OpenJournal(path string, each func(record []byte) bool) (*Journal, error) {
	file, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		return nil, err
	}
	j := &Journal{file: file}
	info, err := file.Stat()
	if err == nil {
		j.end, err = readRecords(file, info.Size(), each)
	}
	if err == nil {
		err = file.Truncate(j.end)
	}
	if err != nil {
		return nil, errors.Join(fmt.Errorf("%s: %w", path, err), file.Close())
	}
	return j, nil
}

// readRecords reads whole records and says where they end.
func readRecords(r io.ReaderAt, size int64, each func(record []byte) bool) (end int64, err error) {
	var head [recordHead]byte
	var record []byte
	for size-end >= recordHead {
		if _, err := r.ReadAt(head[:], end); err != nil {
			return 0, err
		}
		n := int64(binary.LittleEndian.Uint32(head[:4]))
		if n > longestRecord || n > size-end-recordHead {
			break
		}
		if int64(cap(record)) < n {
			record = make([]byte, n)
		}
		record = record[:n]
		if _, err := r.ReadAt(record, end+recordHead); n > 0 && err != nil {
			return 0, err
		}
		if crc32.Checksum(record, castagnoli) != binary.LittleEndian.Uint32(head[4:]) || !each(record) {
			break
		}
		end += recordHead + n
	}
	return end, nil
}

// Append writes a record behind the others. It is safe from a power cut after Sync.
func (j *Journal) Append(record []byte) error {
	if len(record) > longestRecord {
		return fmt.Errorf("internal error: a record of %d bytes", len(record))
	}
	all := make([]byte, recordHead, recordHead+len(record))
	binary.LittleEndian.PutUint32(all, uint32(len(record)))
	binary.LittleEndian.PutUint32(all[4:], crc32.Checksum(record, castagnoli))
	if _, err := j.file.WriteAt(append(all, record...), j.end); err != nil {
		return fmt.Errorf("journal: %w", err)
	}
	j.end += int64(recordHead + len(record))
	return nil
}

// Sync brings what was appended to the disk.
func (j *Journal) Sync() error { return j.file.Sync() }

// Close ends the work; the file stays.
func (j *Journal) Close() error { return j.file.Close() }
