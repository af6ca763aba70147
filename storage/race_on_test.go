//go:build race

package storage_test

// checked: a race build ends the process wherever bbolt follows a damaged pointer, before the panic that
// storage recovers from. What damages the index's pages is tested in plain builds only.
const checked = true
