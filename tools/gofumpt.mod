module leadline

go 1.26.0

tool mvdan.cc/gofumpt

require (
	golang.org/x/mod v0.40.0 // indirect
	golang.org/x/sync v0.22.0 // indirect
	golang.org/x/tools v0.49.0 // indirect
	mvdan.cc/gofumpt v0.12.0 // indirect
)
