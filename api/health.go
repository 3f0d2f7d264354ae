package api

import (
	"context"
	"net/http"
	"time"

	"github.com/labstack/echo/v4"
)

// readyLimit is how long the database may take to answer a health check.
const readyLimit = 2 * time.Second

type healthOut struct {
	Status string `json:"status"`
}

func (s *Server) alive(c echo.Context, _ noParams) error {
	return answerJSON(c, http.StatusOK, mediaJSON, healthOut{"alive"})
}

func (s *Server) ready(c echo.Context, _ noParams) error {
	ctx, cancel := context.WithTimeout(c.Request().Context(), readyLimit)
	defer cancel()
	if err := s.store.Ping(ctx); err != nil {
		return err
	}
	return answerJSON(c, http.StatusOK, mediaJSON, healthOut{"ready"})
}
