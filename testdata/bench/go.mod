module cordwalk.example/cordwalk/testdata/bench

go 1.26.0

require (
	cordwalk.example/cordwalk v0.0.0
	github.com/mattn/go-sqlite3 v1.14.53
	github.com/stretchr/testify v1.11.1
	go.etcd.io/bbolt v1.5.0
	golang.org/x/sys v0.50.0
)

require (
	filippo.io/age v1.3.2 // indirect
	filippo.io/hpke v0.4.0 // indirect
	github.com/davecgh/go-spew v1.1.1 // indirect
	github.com/fxamacker/cbor/v2 v2.10.0 // indirect
	github.com/google/uuid v1.6.0 // indirect
	github.com/klauspost/compress v1.20.4 // indirect
	github.com/pmezard/go-difflib v1.0.0 // indirect
	github.com/x448/float16 v0.8.4 // indirect
	golang.org/x/crypto v0.59.0 // indirect
	gonum.org/v1/gonum v0.17.0 // indirect
	gopkg.in/yaml.v3 v3.0.1 // indirect
)

replace cordwalk.example/cordwalk => ../..
