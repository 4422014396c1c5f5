package fettle

import (
	"encoding/json"
	"fmt"
	"io"
	"net/http"
)

// Read takes what a method of [Client] returns and reads the answer: a T, or the failure that the server told of.
//
//	task, err := fettle.Read[fettle.Task](client.GetTask(ctx, "cricket-ganglion", 12))
func Read[T any](resp *http.Response, err error) (T, error) {
	var answer T
	if err != nil {
		return answer, err
	}
	defer resp.Body.Close()
	body, err := io.ReadAll(resp.Body)
	if err != nil {
		return answer, err
	}
	if resp.StatusCode >= 300 {
		return answer, Failure(resp, body)
	}
	if err := json.Unmarshal(body, &answer); err != nil {
		return answer, fmt.Errorf("the server's answer is not understood: %w", err)
	}
	return answer, nil
}
