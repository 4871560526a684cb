package relay

import "syscall"

// fullDisk takes part of a line and no more, as a disk does that is full.
type fullDisk struct{ file }

func (d fullDisk) Write(b []byte) (int, error) {
	n, _ := d.file.Write(b[:len(b)/2])
	return n, syscall.ENOSPC
}

// FillDisk makes the disk of a spool full, or gives it room again.
func FillDisk(s *Spool, full bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if d, was := s.file.(fullDisk); was && !full {
		s.file = d.file
	} else if !was && full {
		s.file = fullDisk{s.file}
	}
}
