package main

import (
	"compress/gzip"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"os"

	"golang.org/x/exp/mmap"

	"leadline/trial/measured/record"
)

// recordFile is a measurement record on disk: text or packed, memory-mapped, or
// text compressed by gzip, which is read as a stream.
type recordFile struct {
	name   string
	source record.Source
	close  func() error
}

// openRecord finds out how a record is stored.
func openRecord(name string) (*recordFile, error) {
	info, err := os.Stat(name)
	if err != nil {
		return nil, err
	}
	if info.IsDir() {
		return nil, fmt.Errorf("%s: is a directory, expected a record", name)
	}
	head, err := firstBytes(name)
	if err != nil {
		return nil, err
	}
	if len(head) >= 2 && head[0] == 0x1f && head[1] == 0x8b {
		var open []io.Closer
		return &recordFile{name: name,
			source: func() (record.Stream, error) {
				file, err := os.Open(name)
				if err != nil {
					return nil, err
				}
				open = append(open, file)
				text, err := gzip.NewReader(file)
				if err != nil {
					return nil, fmt.Errorf("%s: %w", name, err)
				}
				return record.NewReader(name, text)
			},
			close: func() error {
				var errs []error
				for _, c := range open {
					errs = append(errs, c.Close())
				}
				return errorsFirst(errs...)
			},
		}, nil
	}
	file, err := mmap.Open(name)
	if err != nil {
		return nil, err
	}
	return &recordFile{name: name, source: record.At(name, file, int64(file.Len())), close: file.Close}, nil
}

// header reads the first line only.
func (r *recordFile) header() (*record.Header, error) {
	stream, err := r.source()
	if err != nil {
		return nil, err
	}
	return stream.Header(), nil
}

// hash returns the SHA-256 of the file's bytes.
func (r *recordFile) hash() (string, error) {
	file, err := os.Open(r.name)
	if err != nil {
		return "", err
	}
	defer file.Close()
	sum := sha256.New()
	if _, err := io.Copy(sum, file); err != nil {
		return "", err
	}
	return hex.EncodeToString(sum.Sum(nil)), nil
}
