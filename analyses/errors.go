package analyses

// InputError says that what was asked cannot be computed as it was asked: a
// level that is never crossed, a port of the wrong kind.
type InputError struct {
	Message string
}

func (e *InputError) Error() string { return e.Message }
