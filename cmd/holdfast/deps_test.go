package main

import (
	_ "github.com/apache/arrow/go/v17/arrow"
	_ "github.com/apache/arrow/go/v17/arrow/csv"
	_ "github.com/apache/arrow/go/v17/arrow/ipc"
	_ "github.com/apache/arrow/go/v17/parquet/pqarrow"
	_ "github.com/google/renameio/v2"
	_ "github.com/pelletier/go-toml/v2"
	_ "github.com/rogpeppe/go-internal/testscript"
	_ "github.com/schollz/progressbar/v3"
	_ "github.com/spf13/cobra"
	_ "golang.org/x/sync/errgroup"
	_ "golang.org/x/term"
	_ "golang.org/x/sys/unix"
	_ "gonum.org/v1/gonum/mat"
	_ "gonum.org/v1/gonum/stat/distuv"
)
