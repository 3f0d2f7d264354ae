package main

import (
	"context"
	"fmt"
	"net/http"
	"strings"
	"time"
)

// health asks a running server whether it is ready; the container's health
// check runs it, since its image has no other HTTP client.
func health(ctx context.Context, c *console, args []string) error {
	if len(args) != 1 || args[0] == "--help" {
		return fmt.Errorf("health: name the server, as in http://127.0.0.1:8620")
	}
	ctx, cancel := context.WithTimeout(ctx, 3*time.Second)
	defer cancel()
	request, err := http.NewRequestWithContext(ctx, http.MethodGet, strings.TrimSuffix(args[0], "/")+"/readyz", nil)
	if err != nil {
		return err
	}
	answer, err := http.DefaultClient.Do(request)
	if err != nil {
		return err
	}
	defer answer.Body.Close()
	if answer.StatusCode != http.StatusOK {
		return fmt.Errorf("health: %s is not ready: %s", args[0], answer.Status)
	}
	_, err = fmt.Fprintln(c.out, "ready")
	return err
}
