package postgres

// account is who the server runs as: always this program's own user.
type account struct{}

func serverAccount(string) (account, error) { return account{}, nil }

func (account) own(...string) error { return nil }

func (account) canReach(string) error { return nil }
