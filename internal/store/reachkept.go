package store

import (
	"sync"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// reaches keeps the reach of matters, each as of a version of its characteristic: the
// version grows with everything that a reach is found from, so what is kept is right
// until then, and how much was made since is counted from the machine's log without
// reading.
type reaches struct {
	mu   sync.Mutex
	kept map[uuid.UUID]keptReach // by matter
}

type keptReach struct {
	version int64 // of the characteristic
	reach   *plant.Reach
}

// mostKept bounds the memory; an open matter costs one reading more when it is reached.
const mostKept = 4096

func (r *reaches) get(matter uuid.UUID, version int64) (*plant.Reach, bool) {
	r.mu.Lock()
	defer r.mu.Unlock()
	k, ok := r.kept[matter]
	return k.reach, ok && k.version == version
}

func (r *reaches) put(matter uuid.UUID, version int64, reach *plant.Reach) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.kept == nil || len(r.kept) >= mostKept {
		r.kept = make(map[uuid.UUID]keptReach)
	}
	r.kept[matter] = keptReach{version, reach}
}
