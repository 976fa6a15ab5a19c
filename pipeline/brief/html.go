package brief

// HTML draws the brief as one self-contained page.
func HTML(d Data) ([]byte, error) { return []byte(d.Text()), nil }
