//go:build goexperiment.simd && linux && amd64 && !go1.27 && !race

package mask

import (
	"bufio"
	"fmt"
	"maps"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// TestVectorsStayAmongThemselves reads the machine code of this package: from an
// instruction that fills the upper half of a register to the next that clears them,
// no path may meet a scalar instruction, also not in functions that are called or
// returned to. Source of what such a mixture costs: Intel 64 and IA-32 Architectures
// Optimization Reference Manual, "Mixing AVX code with SSE code" (from memory).
func TestVectorsStayAmongThemselves(t *testing.T) {
	objdump, err := exec.LookPath("objdump")
	require.NoError(t, err, "objdump comes with binutils, which the C compiler needs as well")
	program := filepath.Join(t.TempDir(), "mask.test") // the running one has no names
	build := exec.Command("go", "test", "-c", "-o", program, ".")
	build.Env = append(os.Environ(), "GOEXPERIMENT=simd")
	out, err := build.CombinedOutput()
	require.NoError(t, err, "%s", out)
	code := disassemble(t, objdump, program)
	require.Contains(t, code, "foldshade/mask.forwardVector", "functions that were read")
	a := analysis{code: code, leaves: map[visit]bool{}, visits: map[visit]bool{}}
	for name := range code {
		a.visits[visit{name, false}] = true
	}
	for range 5 { // a call tells more of the function that is called
		for v := range a.visits {
			a.follow(v)
		}
	}
	for _, name := range slices.Sorted(maps.Keys(code)) {
		for _, v := range []visit{{name, false}, {name, true}} {
			if a.visits[v] {
				assert.Empty(t, a.follow(v), "scalar instructions among those on vectors in %s", name)
			}
		}
	}
}

// instruction is one line of machine code; target is where a jump goes, callee
// what is called.
type instruction struct {
	at, op, args string
	target       int
	callee       string
}

var (
	functionLine = regexp.MustCompile(`^[0-9a-f]+ <(foldshade/mask\..*)>:$`)
	codeLine     = regexp.MustCompile(`^\s*([0-9a-f]+):\s+(\S+)\s*(.*)$`)
	calleeName   = regexp.MustCompile(`<([^>]*)>`)
	wideRegister = regexp.MustCompile(`^\s*%[yz]mm`)
)

// disassemble returns the functions of this package.
func disassemble(t *testing.T, objdump, program string) map[string][]instruction {
	cmd := exec.Command(objdump, "-d", "--no-show-raw-insn", "-w", "-j", ".text", program)
	out, err := cmd.StdoutPipe()
	require.NoError(t, err)
	require.NoError(t, cmd.Start())
	all := map[string][]instruction{}
	name := ""
	lines := bufio.NewScanner(out)
	for lines.Scan() {
		line := lines.Text()
		if strings.HasSuffix(line, ">:") {
			name = ""
			if m := functionLine.FindStringSubmatch(line); m != nil {
				name = m[1]
			}
		}
		if m := codeLine.FindStringSubmatch(line); m != nil && name != "" {
			all[name] = append(all[name], instruction{at: m[1], op: m[2], args: m[3]})
		}
	}
	require.NoError(t, lines.Err())
	require.NoError(t, cmd.Wait())
	for _, code := range all {
		link(code)
	}
	return all
}

// link fills the targets of jumps and the names of callees.
func link(code []instruction) {
	index := map[string]int{}
	for i, x := range code {
		index[x.at] = i
	}
	for i := range code {
		x := &code[i]
		x.target = -1
		if to, ok := index[strings.TrimSpace(strings.SplitN(x.args, " ", 2)[0])]; ok && strings.HasPrefix(x.op, "j") {
			x.target = to
		}
		if m := calleeName.FindStringSubmatch(x.args); m != nil && x.op == "call" {
			x.callee = m[1]
		}
	}
}

// visit is a call of a function with upper halves in use or not.
type visit struct {
	name  string
	inUse bool
}

// analysis knows the calls of functions, and after which the upper halves of
// registers are in use.
type analysis struct {
	code           map[string][]instruction
	visits, leaves map[visit]bool
}

// follow takes all paths through a function and returns the scalar instructions
// among those on vectors.
func (a *analysis) follow(v visit) (found []string) {
	code := a.code[v.name]
	type state struct {
		at    int
		inUse bool
	}
	seen := map[state]bool{}
	for todo := []state{{0, v.inUse}}; len(todo) > 0; {
		s := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		if s.at >= len(code) || seen[s] {
			continue
		}
		seen[s] = true
		x := &code[s.at]
		inUse := s.inUse
		switch {
		case x.op == "vzeroupper":
			inUse = false
		case x.op == "ret":
			a.leaves[v] = a.leaves[v] || inUse
			continue
		case strings.HasPrefix(x.callee, "runtime.panic"):
			continue // it does not return
		case x.callee != "":
			inUse = a.call(visit{x.callee, inUse})
		case strings.HasPrefix(x.op, "v"):
			args := strings.Split(strings.SplitN(x.args, "#", 2)[0], ",")
			inUse = inUse || wideRegister.MatchString(args[len(args)-1])
		case strings.Contains(x.args, "%xmm") && inUse:
			found = append(found, fmt.Sprint(x.at, " ", x.op, " ", x.args))
		}
		if x.target >= 0 {
			todo = append(todo, state{x.target, inUse})
		}
		if x.op != "jmp" {
			todo = append(todo, state{s.at + 1, inUse})
		}
	}
	return found
}

// call notes a call and returns the state after it. Functions of other packages
// leave what they find: the runtime's clear the upper halves themselves.
func (a *analysis) call(v visit) bool {
	if _, ours := a.code[v.name]; !ours {
		return v.inUse
	}
	a.visits[v] = true
	return a.leaves[v]
}
