package command

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"strings"
)

// client asks a running server, so that a command never opens the server's database beside it.
type client struct {
	Server string `help:"Address of the running server." default:"${server}" placeholder:"URL"`
}

// defaultServer is where 'serve' answers unless told otherwise.
const defaultServer = "http://127.0.0.1:8470"

// call sends a request without a body and decodes the answer into v.
func (c client) call(ctx context.Context, method, path string, v any) error {
	req, err := http.NewRequestWithContext(ctx, method, strings.TrimSuffix(c.Server, "/")+path, nil)
	if err != nil {
		return usageError(fmt.Sprintf("--server: %v", err))
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return fmt.Errorf("no server answers at %s: start one with 'evenshelf serve', or name it with --server (%w)", c.Server, err)
	}
	defer resp.Body.Close()
	if resp.StatusCode >= 400 {
		var problem struct{ Title, Detail string }
		if json.NewDecoder(io.LimitReader(resp.Body, 1<<16)).Decode(&problem) != nil || problem.Title == "" {
			problem.Title = resp.Status
		}
		return fmt.Errorf("%s", strings.TrimSuffix(problem.Title+": "+problem.Detail, ": "))
	}
	return json.NewDecoder(resp.Body).Decode(v)
}
