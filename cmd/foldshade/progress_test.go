package main

import (
	"os"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// TestProgressOffTerminal: neither a buffer nor a file is a terminal, so
// nothing is drawn however long the job takes.
func TestProgressOffTerminal(t *testing.T) {
	var text strings.Builder
	p := newProgress(&text, "computing")
	p.start = time.Now().Add(-time.Hour)
	p.update(1, 2)
	p.close()
	assert.Empty(t, text.String())

	f, err := os.Create(t.TempDir() + "/log")
	require.NoError(t, err)
	p = newProgress(f, "computing")
	p.start = time.Now().Add(-time.Hour)
	p.update(1, 2)
	p.close()
	info, err := f.Stat()
	require.NoError(t, err)
	assert.Zero(t, info.Size())
	require.NoError(t, f.Close())
}

// TestProgressPatience: a short job draws nothing, a long one draws its title
// and how much is done, and close takes the bar away.
func TestProgressPatience(t *testing.T) {
	var text strings.Builder
	p := newProgress(nil, "computing")
	p.w = &text // as if it were a terminal
	p.update(1, 4)
	assert.Empty(t, text.String(), "within the patience")
	p.start = time.Now().Add(-2 * patience)
	p.update(1, 4)
	assert.Contains(t, text.String(), "computing")
	assert.Contains(t, text.String(), "25%")
	p.close()
	drawn := text.String()
	last := drawn[strings.LastIndex(strings.TrimRight(drawn, "\r"), "\r")+1:]
	assert.Empty(t, strings.TrimSpace(last), "the line is blank at the end")
	p.update(2, 4)
	assert.Equal(t, drawn, text.String(), "nothing after close")
}
