package batch

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"time"

	"linewright/kernel/session"
	"linewright/kernel/wire"
)

// The test binary is also the kernels of these tests: the real one, and some that misbehave.
var kernels = map[string]func(connectionFile string) error{
	"real": func(file string) error {
		var parameters map[string]string
		if text := os.Getenv(ParametersVariable); text != "" {
			if err := json.Unmarshal([]byte(text), &parameters); err != nil {
				return err
			}
		}
		return session.Serve(context.Background(), file, session.Options{Parameters: parameters})
	},
	"mute":      func(string) error { select {} },
	"stillborn": func(string) error { return errors.New("no licence for line codes") },
	// A kernel that never says idle after a cell, and one that answers no cell and heeds no interrupt.
	"no idle": func(file string) error {
		return scripted(file, func(s *wire.Server, m *wire.Message) {
			s.Reply(wire.Shell, m, "execute_reply", nil, map[string]any{"status": "ok", "execution_count": 1})
		})
	},
	"killed": func(file string) error {
		return scripted(file, func(s *wire.Server, m *wire.Message) {
			s.Publish(m, "stream", map[string]any{"name": "stdout", "text": "last words"})
			s.Drain(time.Second)
			if self, err := os.FindProcess(os.Getpid()); err == nil {
				self.Kill()
			}
		})
	},
	"stubborn": func(file string) error { return scripted(file, func(*wire.Server, *wire.Message) {}) },
	"malformed": func(file string) error {
		return scripted(file, func(s *wire.Server, m *wire.Message) {
			s.Publish(m, "stream", map[string]any{"name": 1})
		})
	},
}

// scripted answers kernel_info and leaves cells to execute; it does not end when it is told to.
func scripted(file string, execute func(*wire.Server, *wire.Message)) error {
	c, err := wire.ReadConnection(file)
	if err != nil {
		return err
	}
	s, err := wire.Listen(c, slog.New(slog.NewTextHandler(io.Discard, nil)))
	if err != nil {
		return err
	}
	for {
		m, ok := s.Receive(context.Background(), wire.Shell)
		if !ok {
			return nil
		}
		if m.Type == "execute_request" {
			execute(s, m)
			continue
		}
		s.Reply(wire.Shell, m, "kernel_info_reply", nil, map[string]any{"language_info": map[string]any{"name": "go"}})
		s.Publish(m, "status", map[string]any{"execution_state": "idle"})
	}
}

func TestMain(m *testing.M) {
	if len(os.Args) == 4 && os.Args[1] == "kernel" {
		if err := kernels[os.Args[2]](os.Args[3]); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(3)
		}
		return
	}
	os.Exit(m.Run())
}

// under returns conditions with that kernel and with limits for which a test has the time.
func under(t *testing.T, kernel string) Conditions {
	t.Helper()
	program, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	return Conditions{
		Kernel: []string{program, "kernel", kernel, "{connection_file}"},
		Folder: t.TempDir(),
		limits: &limits{
			start: 10 * time.Second, repeat: 500 * time.Millisecond, shutdown: time.Second,
			interrupt: time.Second, idle: time.Second, lastWords: time.Second,
		},
	}
}

// notebookOf returns a notebook with these cells.
func notebookOf(t *testing.T, sources ...string) *Notebook {
	t.Helper()
	var cells []string
	for i, s := range sources {
		quoted, err := json.Marshal(s)
		if err != nil {
			t.Fatal(err)
		}
		cells = append(cells, fmt.Sprintf(`{"cell_type": "code", "id": "c%d", "metadata": {}, "source": %s, "outputs": [], "execution_count": null}`, i+1, quoted))
	}
	n, err := parse([]byte(withCells(5, cells...)))
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// gone fails the test if the process is still there.
func gone(t *testing.T, pid int) {
	t.Helper()
	if runtime.GOOS != "linux" {
		return
	}
	for range 100 {
		if _, err := os.Stat(fmt.Sprintf("/proc/%d", pid)); errors.Is(err, os.ErrNotExist) {
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	t.Errorf("process %d is still there", pid)
}

// pidCell prints the kernel's process number, alone on a line.
const pidCell = "import \"os\"\nfmt.Println(os.Getpid())"

func pid(t *testing.T, c *Cell) int {
	t.Helper()
	if len(c.Outputs) == 0 {
		t.Fatal("no output")
	}
	id, err := strconv.Atoi(strings.TrimSpace(c.Outputs[0].Text))
	if err != nil {
		t.Fatal(err)
	}
	return id
}

func TestExecute(t *testing.T) {
	n := notebookOf(t,
		"x := 20\nfmt.Println(\"now\", x)",
		"x + 1",
		" \n",
		`page.Slot("s").Set("old")`,
		`page.Slot("s").Set("new")`,
		pidCell,
	)
	asked, err := n.Execute(t.Context(), under(t, "real"))
	if err != nil {
		t.Fatal(err)
	}
	if len(asked) != 0 {
		t.Errorf("asked for %v", asked)
	}
	for i, want := range []string{
		"stream stdout now 20\n",
		"execute_result 21",
		"",
		"display_data new",
		"",
	} {
		got := ""
		for _, o := range n.Cells[i].Outputs {
			if o.Type == stream {
				got += "stream " + o.Stream + " " + o.Text
			} else {
				s, _ := o.text("text/plain")
				got += o.Type + " " + s
			}
		}
		if got != want {
			t.Errorf("cell %d: %q, want %q", i+1, got, want)
		}
	}
	for i, want := range []int{1, 2, 0, 3, 4, 5} { // the blank cell does not count
		if got := n.Cells[i].Count; got != want {
			t.Errorf("cell %d has count %d, want %d", i+1, got, want)
		}
	}
	gone(t, pid(t, n.Cells[5]))
	if n.Metadata["kernelspec"] == nil || n.Metadata["language_info"] == nil {
		t.Errorf("the metadata does not say what the cells are written in: %v", n.Metadata)
	}
	validate(t, encoded(t, n))
}

// What a cell writes to its descriptors and what it prints arrives whole and in order, also when it is more than pipes
// and buffers hold.
func TestLargeOutputArrivesWhole(t *testing.T) {
	n := notebookOf(t, `import ("bytes"; "os")
b := bytes.Repeat([]byte("0123456789abcde\n"), 1_000_000)
fmt.Print(string(b))
os.Stdout.Write(b)
fmt.Println("end")`)
	ctx, cancel := context.WithTimeout(t.Context(), 30*time.Second)
	defer cancel()
	if _, err := n.Execute(ctx, under(t, "real")); err != nil {
		t.Fatal(err)
	}
	want := strings.Repeat("0123456789abcde\n", 2_000_000) + "end\n"
	if out := n.Cells[0].Outputs; len(out) != 1 || out[0].Text != want {
		t.Errorf("%d outputs, the first of %d bytes, want one of %d", len(out), len(out[0].Text), len(want))
	}
}

func TestSameNotebookSameBytes(t *testing.T) {
	cells := []string{`linecode.AMI()`, `[]float64{1, 2}`, `fmt.Println(map[string]int{"b": 1, "a": 2})`}
	var first []byte
	for range 2 {
		n := notebookOf(t, cells...)
		if _, err := n.Execute(t.Context(), under(t, "real")); err != nil {
			t.Fatal(err)
		}
		b := encoded(t, n)
		if first == nil {
			first = b
		} else if string(b) != string(first) {
			t.Errorf("two runs differ:\n%s\n%s", first, b)
		}
	}
}

func TestExecuteStopsAtAFailingCell(t *testing.T) {
	n := notebookOf(t, pidCell, "var m map[string]int\nm[\"a\"] = 1", "3")
	n.Cells[2].Outputs, n.Cells[2].Count = []*Output{{Type: stream, Stream: "stdout", Text: "of the last run"}}, 9
	_, err := n.Execute(t.Context(), under(t, "real"))
	var failed *CellError
	if !errors.As(err, &failed) || failed.Number != 2 || !strings.Contains(err.Error(), "assignment to entry in nil map") {
		t.Errorf("error %v", err)
	}
	if c := n.Cells[1]; len(c.Outputs) != 1 || c.Outputs[0].Type != failure {
		t.Errorf("the failing cell has %v", c.Outputs)
	}
	if c := n.Cells[2]; len(c.Outputs) != 0 || c.Count != 0 {
		t.Errorf("the cell that was not reached has %v, count %d", c.Outputs, c.Count)
	}
	gone(t, pid(t, n.Cells[0]))
}

func TestExecuteGoesOnAfterAnExpectedFailure(t *testing.T) {
	n := notebookOf(t, "undefined", "1")
	n.Cells[0].fields["metadata"] = map[string]any{"tags": []any{"other", "raises-exception"}}
	if _, err := n.Execute(t.Context(), under(t, "real")); err != nil {
		t.Fatal(err)
	}
	if len(n.Cells[0].Outputs) != 1 || len(n.Cells[1].Outputs) != 1 {
		t.Errorf("outputs %v and %v", n.Cells[0].Outputs, n.Cells[1].Outputs)
	}
}

func TestParameters(t *testing.T) {
	n := notebookOf(t, `fmt.Println(page.Float("bit-rate", 1, "Hz"), page.Text("name", "none"))`)
	with := under(t, "real")
	with.Parameters = map[string]string{"bit-rate": "12e6"}
	asked, err := n.Execute(t.Context(), with)
	if err != nil {
		t.Fatal(err)
	}
	if got := n.Cells[0].Outputs[0].Text; got != "1.2e+07 none\n" {
		t.Errorf("printed %q", got)
	}
	if strings.Join(asked, " ") != "bit-rate name" {
		t.Errorf("asked for %v", asked)
	}
}

func TestNobodyCanBeAsked(t *testing.T) {
	_, err := notebookOf(t, `page.Ask("candidate? ")`).Execute(t.Context(), under(t, "real"))
	var failed *CellError
	if !errors.As(err, &failed) || !strings.Contains(err.Error(), "nobody can be asked here") {
		t.Errorf("error %v", err)
	}
}

func TestExecuteIsInterrupted(t *testing.T) {
	n := notebookOf(t, pidCell, "fmt.Println(\"before\")\nfor {\n}", "3")
	ctx, cancel := context.WithCancel(t.Context())
	with := under(t, "real")
	with.limits.interrupt = 10 * time.Second
	with.Progress = begins(func(number int) {
		if number == 2 {
			time.AfterFunc(300*time.Millisecond, cancel)
		}
	})
	_, err := n.Execute(ctx, with)
	if !errors.Is(err, ErrInterrupted) || !strings.Contains(err.Error(), "cell 2") {
		t.Errorf("error %v", err)
	}
	if out := n.Cells[1].Outputs; len(out) != 2 || out[0].Text != "before\n" || out[1].Type != failure {
		t.Errorf("the interrupted cell has %v", out)
	}
	gone(t, pid(t, n.Cells[0]))
}

// begins is a Progress that is told of beginnings only.
type begins func(number int)

func (b begins) Begin(number, _ int, _ *Cell)                    { b(number) }
func (b begins) End(_, _ int, _ *Cell, _ time.Duration, _ error) {}

func TestKernelDies(t *testing.T) {
	n := notebookOf(t, "1", "2")
	_, err := n.Execute(t.Context(), under(t, "killed"))
	if want := "cell 1: the kernel died (signal: killed; perhaps the system ran out of memory)"; err == nil || err.Error() != want {
		t.Errorf("%v, want %s", err, want)
	}
	if out := n.Cells[0].Outputs; len(out) != 1 || out[0].Text != "last words" {
		t.Errorf("outputs %v", out)
	}
	n = notebookOf(t, "import \"sync\"\nvar mu sync.Mutex\nmu.Unlock()")
	_, err = n.Execute(t.Context(), under(t, "real"))
	if want := "cell 1: the kernel died (exit status 2): fatal error: sync: unlock of unlocked mutex"; err == nil || err.Error() != want {
		t.Errorf("%v, want %s", err, want)
	}
}

func TestKernelsThatMisbehave(t *testing.T) {
	for _, c := range []struct{ kernel, want string }{
		{"mute", "the kernel did not answer within 1s"},
		{"stillborn", "the kernel died (exit status 3): no licence for line codes"},
		{"no idle", "cell 1: the kernel answered and then sent nothing for 1s"},
		{"malformed", "cell 1: the kernel's stream is malformed"},
	} {
		t.Run(c.kernel, func(t *testing.T) {
			t.Parallel()
			with := under(t, c.kernel)
			if c.kernel == "mute" {
				with.limits.start = time.Second
			}
			_, err := notebookOf(t, "1").Execute(t.Context(), with)
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("%v, want %s", err, c.want)
			}
		})
	}
	t.Run("stubborn", func(t *testing.T) {
		t.Parallel()
		ctx, cancel := context.WithCancel(t.Context())
		with := under(t, "stubborn")
		with.Progress = begins(func(int) { cancel() })
		_, err := notebookOf(t, "1").Execute(ctx, with)
		if !errors.Is(err, ErrInterrupted) || !strings.Contains(err.Error(), "did not stop within 1s") {
			t.Error(err)
		}
	})
	t.Run("missing", func(t *testing.T) {
		with := under(t, "real")
		with.Kernel = []string{filepath.Join(t.TempDir(), "missing")}
		if _, err := notebookOf(t, "1").Execute(t.Context(), with); err == nil || !strings.Contains(err.Error(), "cannot start the kernel") {
			t.Error(err)
		}
	})
}

func TestNothingIsLeftInTheTemporaryFolder(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir())
	if _, err := notebookOf(t, "1").Execute(t.Context(), under(t, "real")); err != nil {
		t.Fatal(err)
	}
	if left, _ := filepath.Glob(filepath.Join(os.Getenv("TMPDIR"), "linewright-*")); len(left) != 0 {
		t.Errorf("left: %v", left)
	}
}
