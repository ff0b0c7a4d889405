package lookfile

import (
	"os"
	"regexp"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Every example of the looks reference is read as it stands there.
func TestDocExamples(t *testing.T) {
	data, err := os.ReadFile("../../../docs/looks.md")
	require.NoError(t, err)
	block := regexp.MustCompile("(?s)```(sh|yaml|csv)\n(.*?)```")
	flag := regexp.MustCompile(`--look ('[^']*'|\S+)`)
	count := map[string]int{}
	for _, m := range block.FindAllStringSubmatch(string(data), -1) {
		count[m[1]]++
		if m[1] != "sh" {
			looks, err := Read(write(t, "looks."+m[1], m[2]))
			assert.NoError(t, err, m[2])
			assert.GreaterOrEqual(t, len(looks), 2, m[2])
			continue
		}
		for _, f := range flag.FindAllStringSubmatch(m[2], -1) {
			_, err := Flag(strings.Trim(f[1], "'"))
			assert.NoError(t, err, f[1])
		}
	}
	assert.Equal(t, map[string]int{"sh": 6, "yaml": 2, "csv": 1}, count)

	says := regexp.MustCompile("(?s)```text\n(.*?)\n```").FindStringSubmatch(string(data))
	require.NotNil(t, says, "the sample of an error")
	_, err = parseYAML([]byte("looks:\n- name: north\n  incidence: 38\n  azimuth: -13\n"))
	assert.EqualError(t, err, strings.TrimPrefix(says[1], `looks file "looks.yaml": `))
}
