// Command stage serves one of the stages of this module as a process of its own. It
// inspects nothing by itself; a server starts it.
package main

import (
	"fmt"
	"os"

	"lapgate/plugins/builtin"
	"lapgate/plugins/deflectometry"
	"lapgate/plugins/outside"
	"lapgate/plugins/unwrap"
)

func main() {
	var types []string
	for _, f := range append(builtin.Stages(), unwrap.Factory(), deflectometry.Factory()) {
		if len(os.Args) == 2 && f.Type == os.Args[1] {
			outside.Serve(f)
		}
		types = append(types, f.Type)
	}
	fmt.Fprintf(os.Stderr, "stage: want one argument, the type of the stage to serve: %q\n", types)
	os.Exit(2)
}
