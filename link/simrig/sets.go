package simrig

import "gainwright/protocol"

// set is a row of binary32 values that changes as a whole.
type set struct {
	names  []string
	held   []uint32
	staged map[int]uint32
}

// use makes the staged values the held ones if crc is that of the whole row.
func (s *set) use(crc uint16) bool {
	next := append([]uint32(nil), s.held...)
	for i, v := range s.staged {
		next[i] = v
	}
	if protocol.SetCRC(next) != crc {
		return false
	}
	s.held, s.staged = next, nil
	return true
}

func (s *set) stage(i int, v uint32) {
	if s.staged == nil {
		s.staged = map[int]uint32{}
	}
	s.staged[i] = v
}
