package pipeline

import (
	"fmt"
	"os"
	"sync"
)

// shelf holds the input files that workers have open, each once: a file of many
// objects is unpacked and digested once, not once a worker.
type shelf struct {
	run   *Run
	mu    sync.Mutex
	files map[*planInput]*shelved
}

// shelved is an open input, or why it is not open.
type shelved struct {
	in    *planInput
	users int // guarded by the shelf
	open  sync.Once
	file  SpectrumFile
	fault *fault
}

// take returns an input, opened if nobody has it open. It must be given back.
func (s *shelf) take(in *planInput) *shelved {
	s.mu.Lock()
	f := s.files[in]
	if f == nil {
		f = &shelved{in: in}
		s.files[in] = f
	}
	f.users++
	s.mu.Unlock()
	f.open.Do(func() { f.file, f.fault = s.run.open(in) })
	return f
}

// giveBack closes the input if nobody else has it.
func (s *shelf) giveBack(f *shelved) {
	s.mu.Lock()
	f.users--
	last := f.users == 0
	if last {
		delete(s.files, f.in)
	}
	s.mu.Unlock()
	if last && f.file != nil {
		if err := f.file.Close(); err != nil {
			s.run.job.Log.Warn("closing an input failed", "file", f.in.Path, "error", err)
		}
	}
}

// open opens an input that is still as it was planned.
func (r *Run) open(in *planInput) (file SpectrumFile, bad *fault) {
	defer func() {
		if p := recover(); p != nil {
			file, bad = nil, r.report(in.Path, 0, p)
		}
	}()
	path := in.file(r.head.Folder)
	info, err := os.Stat(path)
	if err != nil {
		return nil, &fault{fmt.Sprintf("%s was there when the run was planned and is not now: %s", in.Path, plain(err)), false}
	}
	if info.Size() != in.Size || info.ModTime().UnixNano() != in.MTime {
		return nil, &fault{in.Path + " was written to after the run was planned; begin a new run to process it", false}
	}
	if file, err = r.job.Open(path); err != nil {
		return nil, readFault(err, in.Path)
	}
	return file, nil
}
