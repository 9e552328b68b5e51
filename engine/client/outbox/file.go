package outbox

import (
	"cmp"
	"crypto/rand"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"io/fs"
	"os"
	"runtime/debug"
	"sync"
	"time"

	bolt "go.etcd.io/bbolt"
	berrors "go.etcd.io/bbolt/errors"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// A file is a bbolt database, each change of which is whole and on the disk, or not
// there. Two buckets:
//
//	about    layout  "1"
//	         header  leadline.v1.DriveHeader
//	         asked   the name that was wanted for the drive
//	         name    of the drive
//	         base    8 bytes, big endian: what is subtracted from a batch's number to
//	                 have the server's; not 0 once a server forgot the drive
//	         after   8 bytes: the number of the last batch that was let go
//	         last    8 bytes: the number of the last batch
//	         durable 8 bytes: the highest, of the server's, that it has durably
//	         open    "1" if the drive is not to be ended; else it is not there, as in
//	                 files of earlier versions, which pass over it
//	batches  number, 8 bytes: CRC-32C, little endian, and leadline.v1.Batch
type file struct {
	path string
	db   *bolt.DB

	mu      sync.Mutex
	state   state  // as it is on the disk
	last    uint64 // the number of the last batch
	size    int64  // of the batches' values
	count   int    // of measurements
	acked   uint64 // the number of the last batch that may go
	durably uint64 // as state.durable
	settled time.Time
}

var _ client.Queue = (*file)(nil)

const layout = "1"

var (
	aboutBucket   = []byte("about")
	batchesBucket = []byte("batches")
	castagnoli    = crc32.MakeTable(crc32.Castagnoli)
)

// openFile opens a file of a drive, or makes it; the drive gets the name that it has.
func openFile(path string, d *client.Drive) (f *file, err error) {
	// bbolt believes its pages: of a damaged file it panics, or reads behind its end.
	defer debug.SetPanicOnFault(debug.SetPanicOnFault(true))
	var opened *os.File
	defer func() {
		if r := recover(); r != nil {
			_ = opened.Close() // and with it its lock
			f, err = nil, (&file{path: path}).damaged("a page", fmt.Errorf("%v", r))
		}
	}()
	if d.Header == nil {
		if _, err := os.Stat(path); err != nil {
			return nil, fmt.Errorf("outbox: %w", err)
		}
	}
	db, err := bolt.Open(path, 0o600, &bolt.Options{Timeout: time.Second, OpenFile: func(path string, flag int, mode os.FileMode) (*os.File, error) {
		var err error
		opened, err = os.OpenFile(path, flag, mode)
		return opened, err
	}})
	var system *fs.PathError
	switch {
	case errors.Is(err, berrors.ErrTimeout):
		return nil, fmt.Errorf("outbox: %s is in use by another program: give another file, or end that one", path)
	case errors.As(err, &system):
		return nil, fmt.Errorf("outbox: %w", err)
	case err != nil:
		return nil, fmt.Errorf("outbox: %s is no outbox, or is damaged: %w; keep it if it is to be looked at, and give another file", path, err)
	}
	f = &file{path: path, db: db}
	info, err := opened.Stat()
	if err == nil {
		err = checkPages(opened, info.Size(), db.Info().PageSize)
	}
	if err != nil {
		return nil, errors.Join(f.damaged("its pages", err), db.Close())
	}
	if err := f.begin(d); err != nil {
		return nil, errors.Join(err, db.Close())
	}
	d.Name = f.state.name
	return f, nil
}

// begin reads what the file holds, or writes what it is for.
func (f *file) begin(d *client.Drive) error {
	return f.db.Update(func(tx *bolt.Tx) error {
		about, batches := tx.Bucket(aboutBucket), tx.Bucket(batchesBucket)
		if first, _ := tx.Cursor().First(); first == nil {
			return f.make(tx, d)
		}
		if about == nil {
			return f.damaged("its head", errors.New("it is missing"))
		}
		if l := string(about.Get([]byte("layout"))); l != layout || batches == nil {
			return fmt.Errorf("outbox: %s is of another version of this program, layout %.20q: send it with that one", f.path, l)
		}
		f.state = state{
			asked: string(about.Get([]byte("asked"))), name: string(about.Get([]byte("name"))),
			base: number(about.Get([]byte("base"))), after: number(about.Get([]byte("after"))), durable: number(about.Get([]byte("durable"))),
			open: about.Get(openKey) != nil,
		}
		var had leadlinev1.DriveHeader
		if err := proto.Unmarshal(about.Get([]byte("header")), &had); err != nil {
			return f.damaged("its header", err)
		}
		f.last, f.acked, f.durably = f.state.after, f.state.after, f.state.durable
		err := batches.ForEach(func(k, v []byte) error {
			n := number(k)
			if n != f.last+1 {
				return f.damaged(fmt.Sprintf("batch %d", f.last+1), errors.New("it is missing"))
			}
			b, err := unpack(v)
			if err != nil {
				return f.damaged(fmt.Sprintf("batch %d", n), err)
			}
			f.last, f.size, f.count = n, f.size+int64(len(v)), f.count+len(b.GetMeasurements())
			return nil
		})
		switch {
		case err != nil:
			return err
		case f.last != number(about.Get([]byte("last"))):
			return f.damaged(fmt.Sprintf("batch %d", f.last+1), errors.New("it is missing"))
		case d.Name != "" && d.Name != f.state.asked && d.Name != f.state.name:
			return fmt.Errorf("outbox: %s is of drive %q, not %q: name that one or none, or give another file", f.path, f.state.name, d.Name)
		case d.Header == nil:
			d.Header = &had
		case !proto.Equal(&had, d.Header):
			return fmt.Errorf("outbox: %s is of another drive: vehicle %q, map %q, suite %q and a start of its own; %d measurements of it were not sent: say the same, or give another file",
				f.path, had.GetVehicle(), had.GetMap(), had.GetSuite(), f.count)
		}
		return nil
	})
}

func (f *file) make(tx *bolt.Tx, d *client.Drive) error {
	if d.Header == nil {
		return fmt.Errorf("outbox: there is nothing in %s", f.path)
	}
	f.state.asked = cmp.Or(d.Name, rand.Text())
	f.state.name = f.state.asked
	about, err := tx.CreateBucket(aboutBucket)
	if err != nil {
		return err
	}
	if _, err := tx.CreateBucket(batchesBucket); err != nil {
		return err
	}
	header, err := proto.Marshal(d.Header)
	if err != nil {
		return err
	}
	return errors.Join(about.Put([]byte("layout"), []byte(layout)), about.Put([]byte("header"), header), f.state.put(about))
}

func (f *file) damaged(what string, err error) error {
	return fmt.Errorf("outbox: %s is damaged: %s: %w; keep it if it is to be looked at, and give another file", f.path, what, err)
}

func key(n uint64) []byte { return binary.BigEndian.AppendUint64(nil, n) }

func number(b []byte) uint64 {
	if len(b) != 8 {
		return 0
	}
	return binary.BigEndian.Uint64(b)
}

func unpack(v []byte) (*leadlinev1.Batch, error) {
	if len(v) < 4 {
		return nil, errors.New("it is cut off")
	}
	if sum, want := crc32.Checksum(v[4:], castagnoli), binary.LittleEndian.Uint32(v); sum != want {
		return nil, fmt.Errorf("its checksum is %08x and should be %08x", sum, want)
	}
	b := &leadlinev1.Batch{}
	return b, proto.Unmarshal(v[4:], b)
}

// add writes a batch; it is on the disk when add returns.
func (f *file) add(batch []*leadlinev1.SensorMeasurement) error {
	v, err := proto.MarshalOptions{}.MarshalAppend(make([]byte, 4), &leadlinev1.Batch{Measurements: batch})
	if err != nil {
		return err
	}
	binary.LittleEndian.PutUint32(v, crc32.Checksum(v[4:], castagnoli))
	f.mu.Lock()
	defer f.mu.Unlock()
	err = f.db.Update(func(tx *bolt.Tx) error {
		b := tx.Bucket(batchesBucket)
		b.FillPercent = 0.9 // keys only grow
		return errors.Join(b.Put(key(f.last+1), v), tx.Bucket(aboutBucket).Put([]byte("last"), key(f.last+1)))
	})
	if err != nil {
		return fmt.Errorf("outbox: writing %s: %w", f.path, err)
	}
	f.last++
	f.size += int64(len(v))
	f.count += len(batch)
	return nil
}

// Held implements client.Queue.
func (f *file) Held() (after, last uint64) {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.acked - f.state.base, f.last - f.state.base
}

// Batch implements client.Queue.
func (f *file) Batch(n uint64) (list []*leadlinev1.SensorMeasurement, err error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	err = f.db.View(func(tx *bolt.Tx) error {
		b, err := unpack(tx.Bucket(batchesBucket).Get(key(n + f.state.base)))
		if err != nil {
			return f.damaged(fmt.Sprintf("batch %d", n+f.state.base), err)
		}
		list = b.GetMeasurements()
		return nil
	})
	return list, err
}

// Acknowledged implements client.Queue. The disk is told now and then: of what was
// let go and is there again after a failure of power, the server says that it has it.
func (f *file) Acknowledged(n, durable uint64) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.acked, f.durably = n+f.state.base, max(durable, f.durably)
	f.last = max(f.last, f.acked) // a file that is new
	if f.acked-f.state.after < 256 && time.Since(f.settled) < settleEvery {
		return nil
	}
	return f.write(f.state)
}

// settle has the disk know what may go.
func (f *file) settle() error {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.write(f.state)
}

// anew has what the file holds go on as the drive of another name.
func (f *file) anew() error {
	f.mu.Lock()
	defer f.mu.Unlock()
	next := f.state
	next.name, next.base, f.durably = rand.Text(), f.acked, 0
	return f.write(next)
}

// write makes the file's state another one, and lets batches go. The lock is held.
func (f *file) write(next state) error {
	next.after, next.durable = f.acked, f.durably
	if next == f.state {
		return nil
	}
	size, count := f.size, f.count
	err := f.db.Update(func(tx *bolt.Tx) error {
		b := tx.Bucket(batchesBucket)
		c := b.Cursor()
		for k, v := c.First(); k != nil && number(k) <= next.after; k, v = c.First() {
			gone, err := unpack(v)
			if err != nil {
				return f.damaged(fmt.Sprintf("batch %d", number(k)), err)
			}
			size, count = size-int64(len(v)), count-len(gone.GetMeasurements())
			if err := b.Delete(k); err != nil {
				return err
			}
		}
		about := tx.Bucket(aboutBucket)
		return errors.Join(next.put(about), about.Put([]byte("last"), key(f.last)))
	})
	if err != nil {
		return fmt.Errorf("outbox: writing %s: %w", f.path, err)
	}
	f.state, f.size, f.count, f.settled = next, size, count, time.Now()
	return nil
}

// Close closes the file, which keeps what it holds.
func (f *file) Close() error { return errors.Join(f.settle(), f.db.Close()) }

// remove closes it and takes it away: its drive has ended.
func (f *file) remove() error { return errors.Join(f.db.Close(), os.Remove(f.path)) }
