package junction

func (m *Model) anchor() error { return nil }
