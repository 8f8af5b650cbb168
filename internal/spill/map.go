package spill

import (
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"io"
	"os"
)

// Key is the hash of what a Map is asked for.
type Key [16]byte

// KeyOf hashes a text: the first half of its SHA-256, so that two texts of a
// billion share one with a probability of 1e-21.
func KeyOf(text string) Key {
	sum := sha256.Sum256([]byte(text))
	return Key(sum[:16])
}

// Value is what a Map holds for a key.
type Value [2]int64

// record is a slot of the file: key and value; a key of zeros is a free slot.
const record = 32

// memoryMost is how many entries a Map keeps in memory, some 10 MB.
const memoryMost = 100_000

// Map maps keys to values. Beyond Most entries it is a hash table with open
// addressing in a file: two or three reads of 32 bytes a look-up. Get may be
// called by several goroutines, Put by one while nobody else calls anything.
type Map struct {
	Folder string // where the file is made
	Most   int    // entries in memory; 0 for some 10 MB

	memory map[Key]Value
	file   *os.File
	slots  uint64 // a power of two
	used   uint64
}

// Put sets the value of a key and reports whether the key is new.
func (m *Map) Put(k Key, v Value) (isNew bool, err error) {
	k = k.nonzero()
	if m.file == nil {
		if m.memory == nil {
			m.memory = map[Key]Value{}
		}
		most := m.Most
		if most == 0 {
			most = memoryMost
		}
		_, had := m.memory[k]
		if had || len(m.memory) < most {
			m.memory[k] = v
			return !had, nil
		}
	}
	if m.file == nil || 2*m.used >= m.slots {
		if err := m.grow(); err != nil {
			return false, err
		}
	}
	at, _, had, err := m.find(k)
	if err != nil {
		return false, err
	}
	var slot [record]byte
	copy(slot[:], k[:])
	binary.LittleEndian.PutUint64(slot[16:], uint64(v[0]))
	binary.LittleEndian.PutUint64(slot[24:], uint64(v[1]))
	if _, err := m.file.WriteAt(slot[:], int64(at)*record); err != nil {
		return false, err
	}
	if !had {
		m.used++
	}
	return !had, nil
}

// Get returns the value of a key.
func (m *Map) Get(k Key) (v Value, ok bool, err error) {
	k = k.nonzero()
	if m.file == nil {
		v, ok = m.memory[k]
		return v, ok, nil
	}
	_, v, ok, err = m.find(k)
	return v, ok, err
}

// Len returns the number of keys.
func (m *Map) Len() int { return len(m.memory) + int(m.used) }

// Close gives the file back.
func (m *Map) Close() error {
	if m.file == nil {
		return nil
	}
	return m.file.Close()
}

// find returns the slot of a key, or the free one where it belongs.
func (m *Map) find(k Key) (at uint64, v Value, ok bool, err error) {
	var slot [record]byte
	at = binary.LittleEndian.Uint64(k[:]) & (m.slots - 1)
	for {
		if _, err := m.file.ReadAt(slot[:], int64(at)*record); err != nil {
			return 0, v, false, err
		}
		switch Key(slot[:16]) {
		case k:
			v = Value{int64(binary.LittleEndian.Uint64(slot[16:])), int64(binary.LittleEndian.Uint64(slot[24:]))}
			return at, v, true, nil
		case Key{}:
			return at, v, false, nil
		}
		at = (at + 1) & (m.slots - 1)
	}
}

// grow moves all entries to a file with four times the slots.
func (m *Map) grow() error {
	f, err := File(m.Folder)
	if err != nil {
		return err
	}
	old := *m
	m.file, m.memory, m.used = f, nil, 0
	if m.slots *= 4; m.slots == 0 {
		for m.slots = 1024; m.slots < 4*uint64(len(old.memory)); m.slots *= 2 {
		}
	}
	if err := f.Truncate(int64(m.slots) * record); err != nil {
		return err
	}
	for k, v := range old.memory { // into slots: the order does not matter
		if _, err := m.Put(k, v); err != nil {
			return err
		}
	}
	if old.file == nil {
		return nil
	}
	defer old.file.Close()
	chunk := make([]byte, 2048*record)
	for at := int64(0); ; at += int64(len(chunk)) {
		n, err := old.file.ReadAt(chunk, at)
		for i := 0; i+record <= n; i += record {
			k := Key(chunk[i : i+16])
			if k == (Key{}) {
				continue
			}
			v := Value{int64(binary.LittleEndian.Uint64(chunk[i+16:])), int64(binary.LittleEndian.Uint64(chunk[i+24:]))}
			if _, err := m.Put(k, v); err != nil {
				return err
			}
		}
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
	}
}

// nonzero keeps clear of the mark of free slots; no text is known to have that
// hash.
func (k Key) nonzero() Key {
	if k == (Key{}) {
		k[0] = 1
	}
	return k
}
