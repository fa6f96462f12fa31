package reports

import _ "embed"

// Schema is the JSON Schema of the Report, the contract with other programs.
//
//go:embed schema.json
var Schema []byte
