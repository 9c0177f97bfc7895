package record

import "github.com/google/uuid"

// NewID is a fresh UUID, version 7: they sort by time.
func NewID() string {
	id, err := uuid.NewV7()
	if err != nil {
		panic("record: the system gives no random numbers: " + err.Error())
	}
	return id.String()
}
