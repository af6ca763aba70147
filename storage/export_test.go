package storage

// Flush brings the index up to date now.
func (s *Store) Flush() error { return s.flush() }
