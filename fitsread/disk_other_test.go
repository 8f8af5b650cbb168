//go:build !linux

package fitsread

import "errors"

func asNobody() error { return errors.New("only on Linux") }

func asRoot() error { return nil }
