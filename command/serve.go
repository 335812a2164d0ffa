package command

import (
	"fmt"
	"net"
)

type serveCmd struct {
	Listen      string            `help:"Address and port to answer on." default:"127.0.0.1:8470" placeholder:"HOST:PORT"`
	Shelf       map[string]string `help:"Register a shelf at start: a short name and the folder it stands for. May be repeated." placeholder:"NAME=DIR"`
	ShelfRoots  []string          `help:"Only folders below these may be registered as shelves (default: any)." placeholder:"DIR" type:"path"`
	OpenNetwork bool              `help:"Answer on an address other machines can reach. There is no sign-in yet: everyone who can reach it can start runs and listen."`
}

func (c *serveCmd) Run(a *app) error {
	if err := c.checkAddress(); err != nil {
		return err
	}
	s, err := a.startServer(serverOptions{
		data: a.Data, listen: c.Listen, shelfRoots: c.ShelfRoots, anyHost: c.OpenNetwork, shelves: c.Shelf,
	})
	if err != nil {
		return err
	}
	fmt.Fprintf(a.stdout, "Evenshelf is at %s  (Ctrl-C stops it)\n", s.url)
	select {
	case <-a.ctx.Done():
		a.log.Info("stopping: recordings being worked on are finished if that is soon, or taken up again at the next start")
		return s.stop()
	case err := <-s.failed:
		s.stop()
		return err
	}
}

func (c *serveCmd) checkAddress() error {
	host, _, err := net.SplitHostPort(c.Listen)
	if err != nil {
		return usageError(fmt.Sprintf("--listen: %v", err))
	}
	ip := net.ParseIP(host)
	if c.OpenNetwork || host == "localhost" || (ip != nil && ip.IsLoopback()) {
		return nil
	}
	return usageError(fmt.Sprintf("--listen %s can be reached from other machines, and there is no sign-in yet; add --open-network if that is meant", c.Listen))
}
