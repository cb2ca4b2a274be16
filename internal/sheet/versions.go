package sheet

import (
	"sync"

	pb "limitary/api/limitary/v1"
)

// versionsMax bounds the versions kept in memory: a few megabytes.
const versionsMax = 2_000

// versions keeps approved versions, of which the numbers never change. It says nothing of who may see them, nor of which one
// is in force.
type versions struct {
	mu    sync.Mutex
	byKey map[versionKey]*pb.Version
}

type versionKey struct {
	chart  string
	number int32
}

func newVersions() *versions { return &versions{byKey: map[versionKey]*pb.Version{}} }

func (c *versions) get(chart string, number int32) *pb.Version {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.byKey[versionKey{chart, number}]
}

// put keeps a version, in the place of any other where there is no room.
func (c *versions) put(v *pb.Version) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for key := range c.byKey {
		if len(c.byKey) < versionsMax {
			break
		}
		delete(c.byKey, key)
	}
	c.byKey[versionKey{v.Chart, v.Number}] = v
}
