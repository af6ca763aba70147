package sheet

import _ "embed"

// RecordsSchema is the JSON schema (draft 2020-12) of the records format.
//
//go:embed schema/records.schema.json
var RecordsSchema []byte
