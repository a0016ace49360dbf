package main

import (
	"context"
	"encoding/json"
	"fmt"
	"os"

	"linewright/kernel/batch"
	"linewright/kernel/session"
)

type serveCommand struct {
	File string `arg:"" name:"connection-file" help:"The Jupyter connection file."`
}

func (c serveCommand) Run() error {
	var parameters map[string]string
	if text := os.Getenv(batch.ParametersVariable); text != "" {
		if err := json.Unmarshal([]byte(text), &parameters); err != nil {
			return fmt.Errorf("%s is no JSON object of texts: %w", batch.ParametersVariable, err)
		}
		os.Unsetenv(batch.ParametersVariable) // kernels that a cell starts are none of this run
	}
	return session.Serve(context.Background(), c.File, session.Options{Version: version(), Parameters: parameters})
}
