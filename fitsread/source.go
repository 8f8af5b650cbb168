package fitsread

import (
	"bytes"
	"compress/gzip"
	"errors"
	"io"
	"io/fs"
	"os"
	"syscall"
	"time"
)

// source is the file behind a File: on disk, or unpacked in memory.
type source struct {
	io.ReaderAt
	size    int64
	file    *os.File  // nil when unpacked or given as bytes
	written time.Time // when the file was last written to before it was opened
	gzipped bool
}

const hintCopy = "fetch or copy the file again"

// openSource opens a regular file. Anything else (folder, device, pipe) is
// refused by its type before it is opened, since opening a pipe would block.
func openSource(path string, maxUnpacked int64) (*source, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, osFault(err)
	}
	if !info.Mode().IsRegular() {
		return nil, fault(ErrNotRegular, -1, "give a FITS file", "%s", describeMode(info.Mode()))
	}
	f, info, err := openRegular(path)
	if err != nil {
		return nil, err
	}
	src := &source{ReaderAt: f, size: info.Size(), file: f, written: info.ModTime()}
	var magic [2]byte
	if n, _ := f.ReadAt(magic[:], 0); n == 2 && magic[0] == 0x1f && magic[1] == 0x8b {
		data, err := unpack(f, maxUnpacked)
		changed := src.unchanged()
		f.Close()
		if changed != nil {
			return nil, changed
		}
		if err != nil {
			return nil, err
		}
		return &source{ReaderAt: bytes.NewReader(data), size: int64(len(data)), gzipped: true}, nil
	}
	return src, nil
}

// openRegular opens what was a regular file a moment ago. Should the path have
// changed hands it neither waits for the other end of a pipe nor reads from a device.
func openRegular(path string) (*os.File, fs.FileInfo, error) {
	f, err := os.OpenFile(path, os.O_RDONLY|syscall.O_NONBLOCK, 0)
	if err != nil {
		return nil, nil, osFault(err)
	}
	info, err := f.Stat()
	if err != nil || !info.Mode().IsRegular() {
		f.Close()
		return nil, nil, fault(ErrNotRegular, -1, "give a FITS file", "it changed into something else while it was opened")
	}
	return f, info, nil
}

// unchanged returns an error when the file was written to since it was opened.
func (s *source) unchanged() error {
	if s.file == nil {
		return nil
	}
	info, err := s.file.Stat()
	switch {
	case err != nil:
		return fault(err, -1, "check the disk or the network", "it cannot be looked at any more: %v", err)
	case info.Size() != s.size || !info.ModTime().Equal(s.written):
		return fault(ErrChanged, -1, "process it again when it is complete", "it was written to while it was read")
	}
	return nil
}

func (s *source) close() error {
	if s.file == nil {
		return nil
	}
	return s.file.Close()
}

func osFault(err error) *ReadError {
	hint, msg := "check the path", err.Error()
	var pe *fs.PathError
	if errors.As(err, &pe) {
		msg = "cannot be opened: " + pe.Err.Error()
	}
	if errors.Is(err, fs.ErrPermission) {
		hint = "give read permission"
	}
	return &ReadError{HDU: -1, Row: -1, Msg: msg, Hint: hint, Err: err}
}

func describeMode(m fs.FileMode) string {
	switch {
	case m.IsDir():
		return "this is a folder, not a file"
	case m&fs.ModeNamedPipe != 0:
		return "this is a pipe, not a file"
	case m&fs.ModeDevice != 0:
		return "this is a device, not a file"
	}
	return "this is not a regular file"
}

// keeping keeps the failure of a disk, which is no fault of what is packed on it.
type keeping struct {
	io.Reader
	failed error
}

func (k *keeping) Read(b []byte) (int, error) {
	n, err := k.Reader.Read(b)
	if err != nil && err != io.EOF {
		k.failed = err
	}
	return n, err
}

// unpack inflates a gzip stream of at most limit bytes. The size that the
// stream claims for itself is not believed.
func unpack(r io.Reader, limit int64) ([]byte, error) {
	disk := &keeping{Reader: r}
	z, err := gzip.NewReader(disk)
	if err != nil && disk.failed == nil {
		return nil, fault(ErrTruncated, -1, hintCopy, "the gzip stream cannot be read: %v", err)
	}
	var buf bytes.Buffer
	var n int64
	if err == nil {
		n, err = io.Copy(&buf, io.LimitReader(z, limit+1))
	}
	switch {
	case disk.failed != nil:
		return nil, fault(disk.failed, -1, "check the disk or the network", "it cannot be read: %v", disk.failed)
	case n > limit:
		return nil, fault(ErrTooLarge, -1, "unpack it with gunzip, or raise the limit",
			"it unpacks to more than %d bytes", limit)
	case err != nil:
		return nil, fault(ErrTruncated, -1, hintCopy, "the gzip stream breaks off after %d bytes: %v", n, err)
	}
	return buf.Bytes(), nil
}
