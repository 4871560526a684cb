package main

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"strings"
	"text/tabwriter"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// userCmd works on people beside the pages of the administration, also while the plant is
// served.
type userCmd struct {
	Add      userAddCmd      `cmd:"" help:"Add a person. The password is read from standard input, or made and printed."`
	List     userListCmd     `cmd:"" help:"List everybody."`
	Disable  userDisableCmd  `cmd:"" help:"Keep a person out. They are signed out everywhere within seconds."`
	Enable   userEnableCmd   `cmd:"" help:"Let a person in again."`
	Roles    userRolesCmd    `cmd:"" help:"Replace what a person may be."`
	Password userPasswordCmd `cmd:"" aliases:"secret" help:"Replace a person's password. It is read from standard input, or made and printed."`
}

// passwordSource is where a new password comes from.
type passwordSource struct {
	Make bool `help:"Make a password and print it, instead of reading one."`
}

// get reads or makes a password; own are words that may not make it up.
func (c passwordSource) get(in io.Reader, own ...string) (auth.Secret, error) {
	if c.Make {
		return auth.RandomSecret(), nil
	}
	fmt.Fprint(os.Stderr, "Password: ")
	line, err := bufio.NewReader(in).ReadString('\n')
	line = strings.TrimRight(line, "\r\n")
	if err != nil && line == "" {
		return "", errors.New("no password came on standard input; --make makes one")
	}
	s := auth.Secret(line)
	return s, auth.Rules{}.Check(s, own...)
}

func (c passwordSource) tell(out io.Writer, s auth.Secret) {
	if c.Make {
		fmt.Fprintf(out, "Password: %s\nIt is not kept anywhere in clear: note it down now.\n", string(s))
	}
}

func hashed(ctx context.Context, s auth.Secret) (string, error) {
	hasher, err := auth.NewHasher(auth.DefaultCost, 1)
	if err != nil {
		return "", err
	}
	return hasher.Hash(ctx, s)
}

type userAddCmd struct {
	database
	passwordSource
	Login    string   `arg:"" help:"Name for signing in."`
	Name     string   `help:"Printed name." required:""`
	Role     []string `help:"operator, supervisor, engineer or administrator; may be given more than once." required:"" enum:"operator,supervisor,engineer,administrator"`
	Plant    string   `help:"Name of the plant, used once, on an empty database." default:"Plant" env:"HOLDFAST_PLANT"`
	TimeZone string   `help:"Its time zone, used once, on an empty database." default:"UTC" env:"HOLDFAST_TIME_ZONE"`
}

func (c *userAddCmd) Run(ctx context.Context, log *slog.Logger) error {
	secret, err := c.get(os.Stdin, c.Login, c.Name)
	if err != nil {
		return err
	}
	return c.beside(ctx, log, func(st *store.Store) error {
		if err := firstPlant(ctx, st, c.Plant, c.TimeZone); err != nil {
			return err
		}
		hash, err := hashed(ctx, secret)
		if err != nil {
			return err
		}
		p := plant.Person{ID: uuid.Must(uuid.NewV7()), Login: plant.CleanLogin(c.Login), Name: plant.CleanText(c.Name), Roles: rolesFrom(c.Role), Active: true}
		if err := st.AddPerson(ctx, p, hash, uuid.Nil); err != nil {
			return err
		}
		fmt.Printf("%s may sign in as %q.\n", p.Name, p.Login)
		c.tell(os.Stdout, secret)
		return nil
	})
}

func rolesFrom(texts []string) plant.Roles {
	var rs plant.Roles
	for _, t := range texts {
		rs = append(rs, plant.Role(t))
	}
	return rs
}

type userListCmd struct{ database }

func (c *userListCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.beside(ctx, log, func(st *store.Store) error {
		all, err := st.People(ctx)
		if err != nil {
			return err
		}
		w := tabwriter.NewWriter(os.Stdout, 0, 0, 3, ' ', 0)
		fmt.Fprintln(w, "SIGNS IN AS\tNAME\tROLES\tBY\tSTATE")
		for _, p := range all {
			var roles, by []string
			for _, r := range p.Roles {
				roles = append(roles, string(r))
			}
			if p.HasSecret {
				by = append(by, "password")
			}
			if p.HasPIN {
				by = append(by, "PIN")
			}
			state := "may sign in"
			switch {
			case !p.ErasedAt.IsZero():
				state = "name erased"
			case !p.Active:
				state = "kept out"
			}
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\n", p.Login, p.Name, strings.Join(roles, ", "), strings.Join(by, ", "), state)
		}
		return w.Flush()
	})
}

// onPerson finds a person by the name for signing in and does something to them.
func (d *database) onPerson(ctx context.Context, log *slog.Logger, login string, f func(st *store.Store, p plant.Person) error) error {
	return d.beside(ctx, log, func(st *store.Store) error {
		p, err := st.PersonByLogin(ctx, login)
		if err != nil {
			return err
		}
		return f(st, p)
	})
}

type userDisableCmd struct {
	database
	Login string `arg:"" help:"Name for signing in."`
}

func (c *userDisableCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.onPerson(ctx, log, c.Login, func(st *store.Store, p plant.Person) error {
		if err := st.SetActive(ctx, p.ID, false, uuid.Nil); err != nil {
			return err
		}
		fmt.Printf("%s is kept out.\n", p.Name)
		return nil
	})
}

type userEnableCmd struct {
	database
	Login string `arg:"" help:"Name for signing in."`
}

func (c *userEnableCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.onPerson(ctx, log, c.Login, func(st *store.Store, p plant.Person) error {
		if err := st.SetActive(ctx, p.ID, true, uuid.Nil); err != nil {
			return err
		}
		fmt.Printf("%s may sign in.\n", p.Name)
		return nil
	})
}

type userRolesCmd struct {
	database
	Login string   `arg:"" help:"Name for signing in."`
	Role  []string `help:"operator, supervisor, engineer or administrator; may be given more than once. These replace what was." required:"" enum:"operator,supervisor,engineer,administrator"`
}

func (c *userRolesCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.onPerson(ctx, log, c.Login, func(st *store.Store, p plant.Person) error {
		if err := st.SetRoles(ctx, p.ID, rolesFrom(c.Role), uuid.Nil); err != nil {
			return err
		}
		fmt.Printf("%s is now: %s.\n", p.Name, strings.Join(c.Role, ", "))
		return nil
	})
}

type userPasswordCmd struct {
	database
	passwordSource
	Login string `arg:"" help:"Name for signing in."`
}

func (c *userPasswordCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.onPerson(ctx, log, c.Login, func(st *store.Store, p plant.Person) error {
		secret, err := c.get(os.Stdin, p.Login, p.Name)
		if err != nil {
			return err
		}
		hash, err := hashed(ctx, secret)
		if err != nil {
			return err
		}
		if err := st.SetSecret(ctx, p.ID, hash, uuid.Nil); err != nil {
			return err
		}
		fmt.Printf("The password of %s is replaced, and their sessions are over.\n", p.Name)
		c.tell(os.Stdout, secret)
		return nil
	})
}
