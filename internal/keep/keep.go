// Package keep holds the module graph while the first packages are being written.
package keep

import (
	_ "github.com/a-h/templ"
	_ "github.com/alecthomas/kong"
	_ "github.com/alexedwards/scs/pgxstore"
	_ "github.com/alexedwards/scs/v2"
	_ "github.com/chromedp/chromedp"
	_ "github.com/go-chi/chi/v5"
	_ "github.com/golang-migrate/migrate/v4"
	_ "github.com/golang-migrate/migrate/v4/database/pgx/v5"
	_ "github.com/golang-migrate/migrate/v4/source/iofs"
	_ "github.com/google/uuid"
	_ "github.com/gorilla/websocket"
	_ "github.com/jackc/pgx/v5/pgxpool"
	_ "golang.org/x/crypto/argon2"
	_ "golang.org/x/text/message"
	_ "golang.org/x/sys/unix"
	_ "golang.org/x/sync/errgroup"
	_ "gonum.org/v1/gonum/stat"
	_ "gonum.org/v1/gonum/mathext"
)
