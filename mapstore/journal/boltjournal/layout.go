package boltjournal

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"os"

	"example.com/wideberth/mapstore/journal"
	bolt "go.etcd.io/bbolt"
)

// fileFormat is the layout this program writes and the newest that it reads.
const fileFormat = 1

var (
	fileBucket   = []byte("wideberth")
	formatKey    = []byte("format")
	floorSumKey  = []byte("floors")
	floorsBucket = []byte("floors")

	headKey         = []byte("head")
	recordsBucket   = []byte("records")
	requestsBucket  = []byte("requests")
	snapshotsBucket = []byte("snapshots")
)

// mark starts the value that says what the file is.
const mark = "wideberth journal\x00"

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

func withSum(b []byte) []byte {
	return binary.LittleEndian.AppendUint32(b, crc32.Checksum(b, castagnoli))
}

// checkSum takes the checksum off b, which has size bytes with it.
func checkSum(b []byte, size int) ([]byte, bool) {
	if len(b) != size {
		return nil, false
	}
	body := b[:size-4]
	return body, binary.LittleEndian.Uint32(b[size-4:]) == crc32.Checksum(body, castagnoli)
}

func fileMark(format uint32) []byte {
	return withSum(binary.LittleEndian.AppendUint32([]byte(mark), format))
}

// head is where a floor stands.
type head struct {
	version  int64
	hash     [32]byte
	requests keySum
}

// keySum is a sum over the keys of a bucket that does not depend on their order. A
// request id that is missing would be carried out twice, and a floor that is missing
// could be created anew; no look-up can notice that, so Open compares the sums.
type keySum struct{ count, sum uint64 }

const keySumBytes = 16

func (s *keySum) add(k []byte, version int64) {
	h := sha256.New()
	h.Write(key(version))
	h.Write(k)
	s.count++
	s.sum += binary.LittleEndian.Uint64(h.Sum(nil))
}

func (s keySum) append(b []byte) []byte {
	b = binary.LittleEndian.AppendUint64(b, s.count)
	return binary.LittleEndian.AppendUint64(b, s.sum)
}

func readKeySum(b []byte) keySum {
	return keySum{binary.LittleEndian.Uint64(b), binary.LittleEndian.Uint64(b[8:])}
}

const headBytes = 8 + 32 + keySumBytes + 4

func (h head) encode() []byte {
	b := binary.LittleEndian.AppendUint64(nil, uint64(h.version))
	return withSum(h.requests.append(append(b, h.hash[:]...)))
}

func key(version int64) []byte { return binary.BigEndian.AppendUint64(nil, uint64(version)) }

func versionOf(k []byte) (int64, bool) {
	if len(k) != 8 {
		return 0, false
	}
	v := int64(binary.BigEndian.Uint64(k))
	return v, v > 0
}

// floorPart is one floor's buckets within a transaction.
type floorPart struct {
	id                           string
	head                         head
	records, requests, snapshots *bolt.Bucket
	top                          *bolt.Bucket
}

// damage is a *journal.CorruptError about the floor.
func (p *floorPart) damage(version int64, format string, args ...any) error {
	return &journal.CorruptError{Floor: p.id, Version: version, Newest: p.head.version, What: fmt.Sprintf(format, args...)}
}

// about fills in what a decoder or chain cannot know.
func (p *floorPart) about(version int64, err error) error {
	if c, ok := errors.AsType[*journal.CorruptError](err); ok {
		c.Floor, c.Version, c.Newest = p.id, version, p.head.version
	}
	return err
}

// part is a floor's, nil when the file has none of that id.
func (j *Journal) part(tx *bolt.Tx, id string) (*floorPart, error) {
	floors := tx.Bucket(floorsBucket)
	if floors == nil {
		return nil, &journal.CorruptError{What: "the list of floors is missing"}
	}
	if id == "" {
		return nil, nil
	}
	if err := j.refused[id]; err != nil {
		return nil, err
	}
	top := floors.Bucket([]byte(id))
	if top == nil && floors.Get([]byte(id)) == nil {
		return nil, nil
	}
	p := &floorPart{id: id, top: top}
	if top != nil {
		p.records, p.requests, p.snapshots = top.Bucket(recordsBucket), top.Bucket(requestsBucket), top.Bucket(snapshotsBucket)
	}
	if p.records == nil || p.requests == nil || p.snapshots == nil {
		return nil, p.damage(0, "a part of the floor is missing")
	}
	b, ok := checkSum(top.Get(headKey), headBytes)
	if !ok {
		return nil, p.damage(0, "the entry that names the newest version has a wrong checksum")
	}
	p.head.version = int64(binary.LittleEndian.Uint64(b))
	p.head.hash = [32]byte(b[8:40])
	p.head.requests = readKeySum(b[40:])
	return p, nil
}

// floorSum is the sum over the ids of all floors.
func floorSum(tx *bolt.Tx) (keySum, error) {
	if file := tx.Bucket(fileBucket); file != nil {
		if b, ok := checkSum(file.Get(floorSumKey), keySumBytes+4); ok {
			return readKeySum(b), nil
		}
	}
	return keySum{}, &journal.CorruptError{What: "the entry that counts the floors has a wrong checksum"}
}

// addPart makes a floor's buckets.
func addPart(tx *bolt.Tx, id string) (p *floorPart, err error) {
	p = &floorPart{id: id}
	sum, err := floorSum(tx)
	if err != nil {
		return nil, err
	}
	sum.add([]byte(id), 0)
	if err := tx.Bucket(fileBucket).Put(floorSumKey, withSum(sum.append(nil))); err != nil {
		return nil, err
	}
	if p.top, err = tx.Bucket(floorsBucket).CreateBucket([]byte(id)); err != nil {
		return nil, err
	}
	for _, b := range []struct {
		name []byte
		at   **bolt.Bucket
	}{{recordsBucket, &p.records}, {requestsBucket, &p.requests}, {snapshotsBucket, &p.snapshots}} {
		if *b.at, err = p.top.CreateBucket(b.name); err != nil {
			return nil, err
		}
	}
	return p, nil
}

// record is the decoded record of one version, without its place in the chain.
func (p *floorPart) record(version int64) (journal.Record, error) {
	b := p.records.Get(key(version))
	if b == nil {
		return journal.Record{}, p.damage(version, "the record is missing")
	}
	r, err := journal.DecodeRecord(b)
	if err != nil {
		return journal.Record{}, p.about(version, err)
	}
	if r.Floor != p.id || r.Version != version {
		return journal.Record{}, p.damage(version, "the record says that it is version %d of floor %q", r.Version, r.Floor)
	}
	return r, nil
}

// checkHead compares the newest record with the floor's head.
func (p *floorPart) checkHead() error {
	last, _ := p.records.Cursor().Last()
	if v, ok := versionOf(last); !ok || v != p.head.version {
		if ok && v < p.head.version {
			return p.damage(p.head.version, "the newest record kept is version %d", v)
		}
		return p.damage(p.head.version, "there is a record behind the newest, under the key %x", last)
	}
	r, err := p.record(p.head.version)
	if err != nil {
		return err
	}
	if r.Hash != p.head.hash {
		return p.damage(p.head.version, "the record is not the one that was appended last")
	}
	return nil
}

// inspect says whether the file is a journal that this program reads. It goes over
// each floor's request ids; a floor whose ids are not all there is refused, which
// is no error here, so that the other floors can be opened.
func (j *Journal) inspect() error {
	return j.view(context.Background(), func(tx *bolt.Tx) error {
		b := tx.Bucket(fileBucket)
		if b == nil {
			return fmt.Errorf("%w: %q: it is a bbolt file of another program", ErrNotJournal, j.path)
		}
		v, ok := checkSum(b.Get(formatKey), len(mark)+8)
		if !ok || string(v[:len(mark)]) != mark {
			return &journal.CorruptError{What: "the entry that says what the file is has a wrong checksum"}
		}
		if f := binary.LittleEndian.Uint32(v[len(mark):]); f > fileFormat {
			return &journal.FormatError{What: "file", Found: int(f), Known: fileFormat}
		}
		info, err := os.Stat(j.path)
		if err != nil {
			return err
		}
		if info.Size() < tx.Size() {
			return &journal.CorruptError{What: fmt.Sprintf("the file was cut off: %d bytes are left of %d", info.Size(), tx.Size())}
		}
		floors := tx.Bucket(floorsBucket)
		if floors == nil {
			return &journal.CorruptError{What: "the list of floors is missing"}
		}
		var ids keySum
		if err := floors.ForEach(func(id, _ []byte) error {
			ids.add(id, 0)
			p, err := j.part(tx, string(id))
			if err == nil {
				err = p.checkRequests()
			}
			if err != nil {
				j.refused[string(id)] = j.named(err)
			}
			return nil
		}); err != nil {
			return err
		}
		switch sum, err := floorSum(tx); {
		case err != nil:
			return err
		case sum != ids:
			return &journal.CorruptError{What: fmt.Sprintf("the floors are not those that were made: %d are kept, %d were made", ids.count, sum.count)}
		}
		return nil
	})
}

// checkRequests compares a floor's request ids with the sum over them.
func (p *floorPart) checkRequests() error {
	var sum keySum
	c := p.requests.Cursor()
	for id, v := c.First(); id != nil; id, v = c.Next() {
		version, ok := versionOf(v)
		if !ok {
			return p.damage(0, "request id %q names no version", id)
		}
		sum.add(id, version)
	}
	if sum != p.head.requests {
		return p.damage(0, "the request ids are not those that were appended: %d are kept, %d were", sum.count, p.head.requests.count)
	}
	return nil
}
