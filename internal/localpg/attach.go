package localpg

import (
	"errors"
	"fmt"
	"io/fs"
	"net/url"
	"os"
	"path/filepath"
)

// ErrNotServed means that no program serves the cluster of a data folder.
var ErrNotServed = errors.New("no program serves this data folder")

// Attach gives the connection string of a database of the cluster that another running
// program serves from dir, as the owner. It starts nothing, and the cluster ends when
// that program does. It is for small work beside it: the folder of the socket lets in
// only the user as which PostgreSQL runs, and root.
func Attach(dir, database string) (string, error) {
	abs, err := filepath.Abs(dir)
	if err == nil {
		abs, err = filepath.EvalSymlinks(abs)
	}
	if err != nil {
		return "", fmt.Errorf("find the data folder: %w", err)
	}
	file, err := os.Open(filepath.Join(abs, "lock"))
	if errors.Is(err, fs.ErrNotExist) {
		return "", ErrNotServed
	}
	if err != nil {
		return "", fmt.Errorf("read who serves the data folder: %w", err)
	}
	defer file.Close()
	pid, sockets := readLock(file)
	if pid == 0 || sockets == "" {
		return "", ErrNotServed
	}
	switch _, err := os.Stat(filepath.Join(sockets, ".s.PGSQL."+port)); {
	case errors.Is(err, fs.ErrPermission):
		return "", fmt.Errorf("the database in %s is served by process %d, and only the user as which it runs, or root, may reach it. Run this as one of them", abs, pid)
	case errors.Is(err, fs.ErrNotExist):
		return "", ErrNotServed
	case err != nil:
		return "", fmt.Errorf("reach the database in %s: %w", abs, err)
	}
	return connString(sockets, database), nil
}

func connString(sockets, database string) string {
	u := url.URL{
		Scheme:   "postgres",
		User:     url.User(Owner),
		Path:     "/" + database,
		RawQuery: url.Values{"host": {sockets}, "port": {port}, "sslmode": {"disable"}}.Encode(),
	}
	return u.String()
}
