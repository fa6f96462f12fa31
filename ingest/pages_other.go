//go:build !linux

package ingest

func largePages([]byte) {}
