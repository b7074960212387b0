package main

import (
	"compress/gzip"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"

	"golang.org/x/exp/mmap"

	"leadline/trial/measured/record"
)

// recordFile is a measurement record on disk: text or packed, memory-mapped, or
// either of them compressed by gzip, which is read as a stream.
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
		return compressedRecord(name), nil
	}
	file, err := mmap.Open(name)
	if err != nil {
		return nil, err
	}
	return &recordFile{name: name, source: record.At(name, file, int64(file.Len())), close: file.Close}, nil
}

func compressedRecord(name string) *recordFile {
	var open []io.Closer
	return &recordFile{name: name,
		source: record.Restarted(name, func() (io.Reader, error) {
			file, err := os.Open(name)
			if err != nil {
				return nil, err
			}
			open = append(open, file)
			content, err := gzip.NewReader(file)
			if err != nil {
				return nil, damaged(name, 0, err)
			}
			return &decompressed{name: name, content: content}, nil
		}),
		close: func() error {
			var errs []error
			for _, c := range open {
				errs = append(errs, c.Close())
			}
			return errors.Join(errs...)
		},
	}
}

// decompressed says of damage to the compressed data which code it has.
type decompressed struct {
	name    string
	content io.Reader
	read    int64
}

func (d *decompressed) Read(p []byte) (int, error) {
	n, err := d.content.Read(p)
	d.read += int64(n)
	if err != nil && err != io.EOF {
		err = damaged(d.name, d.read, err)
	}
	return n, err
}

func damaged(name string, offset int64, err error) error {
	e := &record.Error{Code: record.CodeChecksum, File: name, Offset: offset, Text: "compressed data are damaged: " + err.Error()}
	if errors.Is(err, io.ErrUnexpectedEOF) {
		e.Code, e.Text = record.CodeTruncated, "compressed data end early"
	}
	return e
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
