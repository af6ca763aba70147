//go:build !race

package storage_test

const checked = false
