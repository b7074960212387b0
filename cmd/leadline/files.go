package main

import (
	"bufio"
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"

	"leadline/cmd/leadline/job"
)

//go:embed example
var exampleFiles embed.FS

// inputs opens the files that a job names and keeps the hash of each.
type inputs struct {
	dir    string // that relative names start from
	inside fs.FS  // holds the files of the embedded example; nil for a job on disk
	hashes map[string]string
}

// newInputs returns inputs whose relative names start from dir.
func newInputs(dir string) *inputs { return &inputs{dir: dir, hashes: map[string]string{}} }

// openJob reads a job file; an empty name stands for the embedded example.
func openJob(name string) (*inputs, []byte, string, error) {
	in := &inputs{hashes: map[string]string{}}
	if name == "" {
		inside, err := fs.Sub(exampleFiles, "example")
		if err != nil {
			return nil, nil, "", err
		}
		in.inside = inside
		name = "beh2.toml"
	} else {
		in.dir = filepath.Dir(name)
	}
	text, err := in.read(filepath.Base(name))
	if err != nil {
		return nil, nil, "", err
	}
	in.hashes = map[string]string{"job.toml": hash(text)}
	return in, text, name, nil
}

// loadJob reads and checks a job file; a job without title gets the file's name.
func loadJob(name string) (*inputs, *job.Job, string, error) {
	in, text, name, err := openJob(name)
	if err != nil {
		return nil, nil, "", err
	}
	j, err := job.Parse(text, name)
	if err == nil && j.Title == "" {
		err = j.Set("title", baseName(name))
	}
	return in, j, name, err
}

// jobFileLimit is far above any job; what is larger is something else.
const jobFileLimit = 1 << 20

// read returns the content of a small file.
func (in *inputs) read(name string) ([]byte, error) {
	file, size, err := in.open(name)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	if size > jobFileLimit {
		return nil, fmt.Errorf("%s: holds %d bytes, expected at most %d for this kind of file", name, size, jobFileLimit)
	}
	return io.ReadAll(io.LimitReader(file, jobFileLimit))
}

// path returns where a name in the job points to.
func (in *inputs) path(name string) string {
	if in.inside != nil || filepath.IsAbs(name) {
		return name
	}
	return filepath.Join(in.dir, name)
}

// open opens a file that the job names; its hash is kept once it has been read
// to the end.
func (in *inputs) open(name string) (io.ReadCloser, int64, error) {
	var file fs.File
	var err error
	if in.inside != nil {
		file, err = in.inside.Open(name)
	} else {
		file, err = os.Open(in.path(name))
	}
	if err != nil {
		return nil, 0, err
	}
	info, err := file.Stat()
	if err != nil {
		file.Close()
		return nil, 0, err
	}
	if info.IsDir() {
		file.Close()
		return nil, 0, fmt.Errorf("%s: is a directory, expected a file", in.path(name))
	}
	sum := sha256.New()
	return &hashed{file: file, reader: io.TeeReader(file, sum), done: func() {
		in.hashes[name] = hex.EncodeToString(sum.Sum(nil))
	}}, info.Size(), nil
}

// hashed hashes a file as it is read; the rest is read when it is closed.
type hashed struct {
	file   io.Closer
	reader io.Reader
	done   func()
}

func (h *hashed) Read(p []byte) (int, error) { return h.reader.Read(p) }

func (h *hashed) Close() error {
	_, err := io.Copy(io.Discard, h.reader)
	if err == nil {
		h.done()
	}
	return errorsFirst(err, h.file.Close())
}

func errorsFirst(errs ...error) error {
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return nil
}

func hash(data []byte) string {
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:])
}

// mayWrite refuses a file that exists unless it may be replaced.
func mayWrite(name string, overwrite bool) error {
	if _, err := os.Stat(name); err == nil && !overwrite {
		return fmt.Errorf("%s: exists already; choose another name or add --overwrite", name)
	}
	return nil
}

// writeFile writes a file so that it is there whole or not at all.
func writeFile(name string, write func(io.Writer) error) error {
	temporary, err := os.CreateTemp(filepath.Dir(name), ".leadline-*")
	if err != nil {
		return err
	}
	buffer := bufio.NewWriterSize(temporary, 1<<20)
	err = write(buffer)
	err = errorsFirst(err, buffer.Flush(), temporary.Chmod(0o644))
	err = errorsFirst(err, temporary.Close())
	if err == nil {
		err = os.Rename(temporary.Name(), name)
	}
	if err != nil {
		os.Remove(temporary.Name())
	}
	return err
}
