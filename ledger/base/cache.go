package base

import (
	"container/list"
	"context"
	"fmt"
	"slices"
	"sync"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
)

// cacheBytes is how much decoded content a base keeps: the blocks used last.
const cacheBytes = 256 << 20

// blockKey names a decoded block.
type blockKey struct {
	section string
	number  int
}

// cache keeps decoded blocks, least recently used out first. Blocks never change, so nothing is ever invalid.
type cache struct {
	mu    sync.Mutex
	most  int
	bytes int
	order *list.List // of *cached, most recently used first
	at    map[blockKey]*list.Element
}

type cached struct {
	key   blockKey
	value any // *geometry or *touches
	bytes int
}

func newCache(most int) *cache {
	return &cache{most: most, order: list.New(), at: make(map[blockKey]*list.Element)}
}

func (c *cache) get(k blockKey) any {
	c.mu.Lock()
	defer c.mu.Unlock()
	e, ok := c.at[k]
	if !ok {
		return nil
	}
	c.order.MoveToFront(e)
	return e.Value.(*cached).value
}

func (c *cache) put(k blockKey, value any, bytes int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if _, ok := c.at[k]; ok {
		return
	}
	c.at[k] = c.order.PushFront(&cached{k, value, bytes})
	c.bytes += bytes
	for c.bytes > c.most && c.order.Len() > 0 {
		last := c.order.Back()
		out := c.order.Remove(last).(*cached)
		delete(c.at, out.key)
		c.bytes -= out.bytes
	}
}

// loadedAtOnce is how many blocks one query fetches.
const loadedAtOnce = 64

// block is the decoded sections of one block that a reader asked for.
type block struct {
	lo                 uint32
	geometry           *geometry
	accepted, rejected *touches
}

// load calls fn with each of some blocks, ascending, decoded. Those not cached are fetched a few at a time, so that
// memory does not grow with their number.
func (b *Base) load(ctx context.Context, db pg.DB, numbers []int, sections []string, fn func(*block) error) error {
	for part := range slices.Chunk(numbers, loadedAtOnce) {
		found := make(map[blockKey]any, len(part)*len(sections))
		var missing []int
		for _, n := range part {
			whole := true
			for _, s := range sections {
				k := blockKey{s, n}
				if found[k] = b.cache.get(k); found[k] == nil {
					whole = false
				}
			}
			if !whole {
				missing = append(missing, n)
			}
		}
		if err := b.fetch(ctx, db, missing, sections, found); err != nil {
			return err
		}
		for _, n := range part {
			blk := &block{lo: uint32(n) * blockSize}
			for _, s := range sections {
				switch v := found[blockKey{s, n}].(type) {
				case *geometry:
					blk.geometry = v
				case *touches:
					if s == sectionAccepted {
						blk.accepted = v
					} else {
						blk.rejected = v
					}
				default:
					return fmt.Errorf("volume %s, section %s: block %d is missing: %w", b.info.Name, s, n, errDamaged)
				}
			}
			if err := fn(blk); err != nil {
				return err
			}
		}
	}
	return nil
}

// fetch reads and decodes blocks into found and into the cache.
func (b *Base) fetch(ctx context.Context, db pg.DB, numbers []int, sections []string, found map[blockKey]any) error {
	if len(numbers) == 0 {
		return nil
	}
	rows, err := db.Query(ctx, `
		select section, number, data from base_block where volume_id = $1 and section = any($2) and number = any($3)`,
		b.info.VolumeID, sections, numbers)
	if err != nil {
		return err
	}
	var k blockKey
	var data []byte
	_, err = pgx.ForEachRow(rows, []any{&k.section, &k.number, &data}, func() error {
		value, bytes, err := b.decode(k, data)
		if err != nil {
			return fmt.Errorf("volume %s, section %s, block %d: %w", b.info.Name, k.section, k.number, err)
		}
		found[k] = value
		b.cache.put(k, value, bytes)
		return nil
	})
	return err
}

func (b *Base) decode(k blockKey, data []byte) (value any, bytes int, err error) {
	content, err := unseal(data)
	if err != nil {
		return nil, 0, err
	}
	n := b.blockLen(k.number)
	if k.section == sectionGeometry {
		g, err := readGeometry(content, n)
		return g, 24 * n, err
	}
	t, err := readTouches(content, n, uint32(k.number)*blockSize)
	if err != nil {
		return nil, 0, err
	}
	if len(t.other) > 0 && int64(slices.Max(t.other)) >= b.info.Supervoxels {
		return nil, 0, errDamaged
	}
	return t, 4*len(t.start) + 4*len(t.other) + len(t.affinity) + len(t.area), nil
}
