package store

import (
	"errors"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

func TestOpenRefuses(t *testing.T) {
	dir := t.TempDir()
	file := func(name, content string) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
			t.Fatal(err)
		}
		return path
	}
	foreign := func(name, bucket string) string {
		path := filepath.Join(dir, name)
		db, err := bolt.Open(path, 0o644, nil)
		if err != nil {
			t.Fatal(err)
		}
		defer db.Close()
		err = db.Update(func(tx *bolt.Tx) error {
			b, err := tx.CreateBucket([]byte(bucket))
			if err != nil {
				return err
			}
			raw, _ := encode(7)
			return b.Put(keyVersion, raw)
		})
		if err != nil {
			t.Fatal(err)
		}
		return path
	}
	for _, c := range []struct {
		path string
		want error
		says string
	}{
		{file("empty", ""), ErrNotStore, "empty (0 bytes)"},
		{file("short", "plan"), ErrNotStore, "another kind of file"},
		{file("text", strings.Repeat("title = \"a plan\"\n", 4000)), ErrNotStore, "another kind of file"},
		{dir, ErrNotStore, "is a directory"},
		{foreign("foreign", "cats"), ErrNotStore, "another program"},
		{foreign("future", "ulpine"), ErrVersion, "has version 7, this program reads version 1"},
		{"/dev/null", ErrNotStore, "no regular file"},
	} {
		for _, readOnly := range []bool{false, true} {
			before, _ := os.ReadFile(c.path)
			s, err := Open(c.path, Options{ReadOnly: readOnly})
			if err == nil {
				s.Close()
			}
			if !errors.Is(err, c.want) || !strings.Contains(err.Error(), c.says) || !strings.Contains(err.Error(), c.path) {
				t.Errorf("%s, read-only %v: %v", filepath.Base(c.path), readOnly, err)
			}
			if after, _ := os.ReadFile(c.path); string(after) != string(before) {
				t.Errorf("%s was changed", c.path)
			}
		}
	}
	missing := filepath.Join(dir, "none")
	if _, err := Open(missing, Options{ReadOnly: true}); !errors.Is(err, ErrMissing) {
		t.Errorf("reading what is not there: %v", err)
	}
	if _, err := Open(filepath.Join(dir, "no", "such", "directory"), Options{}); err == nil || !strings.Contains(err.Error(), "create store") {
		t.Errorf("a directory that is not there: %v", err)
	}
	if left, _ := filepath.Glob(filepath.Join(dir, ".ulpine-new-*")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}

func TestHeld(t *testing.T) {
	s := open(t)
	start := time.Now()
	_, err := Open(s.Path(), Options{})
	if !errors.Is(err, ErrHeld) || !strings.Contains(err.Error(), "another process holds the store") {
		t.Errorf("a second writer: %v", err)
	}
	if waited := time.Since(start); waited < 800*time.Millisecond || waited > 3*time.Second {
		t.Errorf("waited %v for the other process, want about 1 s", waited)
	}
}

// TestReadWhileHeld reads a store in use: what is committed is there, runs under
// way read as in flight, and the reader cannot disturb the writer.
func TestReadWhileHeld(t *testing.T) {
	s := open(t)
	stored, flying := run(0, false), run(1, false)
	put(t, s, stored)
	if err := s.Begin(flying.Arm, flying.Replicate, flying.Key); err != nil {
		t.Fatal(err)
	}
	put(t, s, run(2, false)) // waits for the disk, and for the mark before it
	reader := openAt(t, s.Path(), Options{ReadOnly: true, Timeout: 10 * time.Millisecond})
	entries, err := reader.List(Filter{})
	if err != nil {
		t.Fatal(err)
	}
	states := map[results.State]int{}
	for i := range entries {
		states[entries[i].State]++
	}
	if states[results.Stored] != 2 || states[results.InFlight] != 1 || len(entries) != 3 {
		t.Errorf("read %v", states)
	}
	if err := reader.Put(run(3, false)); !errors.Is(err, ErrReadOnly) {
		t.Errorf("writing to a copy: %v", err)
	}
	put(t, s, flying)
	if _, err := s.Get(flying.Key); err != nil {
		t.Error(err)
	}
}

// TestReadWhileWriting copies a store again and again under a writer that never
// rests: every copy opens and every run in it reads back whole.
func TestReadWhileWriting(t *testing.T) {
	s := open(t)
	done := make(chan struct{})
	go func() {
		defer close(done)
		for n := range 60 {
			if err := s.Put(run(n, false)); err != nil {
				t.Error(err)
			}
		}
	}()
	for busy := true; busy; {
		select {
		case <-done:
			busy = false
		default:
		}
		reader, err := Open(s.Path(), Options{ReadOnly: true, Timeout: time.Millisecond})
		if err != nil {
			t.Fatal(err)
		}
		entries, err := reader.List(Filter{})
		if err != nil {
			t.Fatal(err)
		}
		for i := range entries {
			if _, err := reader.Get(entries[i].Key); err != nil {
				t.Error(err)
			}
		}
		reader.Close()
	}
}

// TestCreateTogether opens one new path from many sides: one store comes of it.
func TestCreateTogether(t *testing.T) {
	path := filepath.Join(t.TempDir(), DefaultPath)
	errs := make(chan error)
	for n := range 8 {
		go func() {
			s, err := Open(path, Options{Timeout: 20 * time.Second})
			if err == nil {
				err = errors.Join(s.Put(run(n, false)), s.Close())
			}
			errs <- err
		}()
	}
	for range 8 {
		if err := <-errs; err != nil {
			t.Error(err)
		}
	}
	s := openAt(t, path, Options{ReadOnly: true})
	if list, err := s.List(Filter{}); len(list) != 8 || err != nil {
		t.Errorf("%d of 8 runs, %v", len(list), err)
	}
}

// filled writes a store with runs of several pieces and returns its bytes.
func filled(t *testing.T) []byte {
	t.Helper()
	s := open(t)
	s.Fix(first, claim, planOf("baseline", "a", "b"))
	for n := range 6 {
		put(t, s, run(n, n%2 == 0))
	}
	s.Close()
	raw, err := os.ReadFile(s.Path())
	if err != nil {
		t.Fatal(err)
	}
	return raw
}

// readAll opens a store file and reads everything in it. Whatever the file holds,
// it must come back with an error at worst.
func readAll(path string, readOnly bool) (stored int, err error) {
	s, err := Open(path, Options{ReadOnly: readOnly})
	if err != nil {
		return 0, err
	}
	defer s.Close()
	if _, err := s.Studies(); err != nil {
		return 0, err
	}
	list, err := s.List(Filter{})
	if err != nil {
		return 0, err
	}
	for _, e := range list {
		if _, err := s.Get(e.Key); err != nil {
			return 0, err
		}
	}
	if !readOnly {
		if err := s.Put(run(17, false)); err != nil {
			return 0, err
		}
	}
	return len(list), nil
}

// TestCutShort truncates a store at every kind of place.
func TestCutShort(t *testing.T) {
	whole := filled(t)
	path := filepath.Join(t.TempDir(), "cut.store")
	sizes := []int{1, 15, 16, 20, 79, 80, 100, 4095, 4096, 4097, 8191, 8192, len(whole) - 1, len(whole)}
	for at := 3 * 4096; at < len(whole); at += max(4096, len(whole)/40/4096*4096) {
		sizes = append(sizes, at, at+1234)
	}
	sound := 0
	for _, size := range sizes {
		for _, readOnly := range []bool{true, false} {
			size = min(size, len(whole))
			if err := os.WriteFile(path, whole[:size], 0o644); err != nil {
				t.Fatal(err)
			}
			n, err := readAll(path, readOnly)
			switch {
			case err == nil && n != 6:
				t.Errorf("%d of %d bytes: %d runs and no error", size, len(whole), n)
			case err == nil:
				sound++
			case !errors.Is(err, ErrDamaged) && !errors.Is(err, ErrNotStore):
				t.Errorf("%d of %d bytes: %v", size, len(whole), err)
			case !strings.Contains(err.Error(), path):
				t.Errorf("%d of %d bytes: the error does not name the file: %v", size, len(whole), err)
			}
			if err != nil && size < len(whole)/2 && size > 8192 && !strings.Contains(err.Error(), "cut short") {
				t.Errorf("%d of %d bytes: %v", size, len(whole), err)
			}
		}
	}
	if sound < 2 {
		t.Error("not even the whole file opened")
	}
}

// TestBehindTheCheck opens a cut file with bbolt directly, as if the cut had
// come after the check: the guard must hold.
func TestBehindTheCheck(t *testing.T) {
	whole := filled(t)
	path := filepath.Join(t.TempDir(), "cut.store")
	faults := 0
	for size := 3 * 4096; size < len(whole); size += len(whole) / 30 {
		for _, readOnly := range []bool{true, false} {
			if err := os.WriteFile(path, whole[:size], 0o644); err != nil {
				t.Fatal(err)
			}
			o := Options{ReadOnly: readOnly, Timeout: time.Second}
			db, err := openBolt(path, o)
			if err == nil {
				s := &Store{path: path, db: db, options: o}
				_, err = s.List(Filter{})
				db.Close()
			}
			if errors.Is(err, ErrDamaged) {
				faults++
			} else if err != nil {
				t.Errorf("%d bytes: %v", size, err)
			}
		}
	}
	if faults == 0 {
		t.Error("no cut was met by the guard")
	}
}

// TestDamage overwrites bytes at random places: errors or sound data, no panic.
func TestDamage(t *testing.T) {
	whole := filled(t)
	path := filepath.Join(t.TempDir(), "damaged.store")
	const seed = 7
	rng := rand.New(rand.NewPCG(seed, 0))
	noticed := 0
	for trial := range 60 {
		raw := append([]byte(nil), whole...)
		for range 1 + rng.IntN(20) {
			at := rng.IntN(len(raw))
			raw[at] = byte(rng.Uint32())
		}
		if trial%3 == 0 { // a page lost
			at := rng.IntN(len(raw)/4096) * 4096
			clear(raw[at : at+4096])
		}
		if err := os.WriteFile(path, raw, 0o644); err != nil {
			t.Fatal(err)
		}
		if _, err := readAll(path, true); err != nil {
			noticed++
		}
	}
	if noticed == 0 {
		t.Errorf("seed %d: no damage was noticed", seed)
	}
}

// TestCopyOfALiveStore takes the file as it is on disk while a run is in
// flight, which is what a crash of the machine leaves.
func TestCopyOfALiveStore(t *testing.T) {
	s := open(t)
	s.Fix(first, claim, planOf("baseline", "a", "b"))
	put(t, s, run(0, true))
	s.Begin("a", 100, keyOf(1))
	if err := s.BreakOff(); err != nil { // waits for the writer
		t.Fatal(err)
	}
	raw, err := os.ReadFile(s.Path())
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "copy.store")
	if err := os.WriteFile(path, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	c := openAt(t, path, Options{})
	list, err := c.List(Filter{})
	if err != nil || names(list) != "baseline/100 stored; a/100 broken off" {
		t.Errorf("%s, %v", names(list), err)
	}
}

const helperVariable = "ULPINE_STORE_TEST_PATH"

// runHelper turns a process of this test binary into a writer that never stops.
func runHelper() {
	path := os.Getenv(helperVariable)
	if path == "" {
		return
	}
	s, err := Open(path, Options{})
	if err != nil {
		fmt.Println(err)
		os.Exit(1)
	}
	for n := 0; ; n++ {
		r := run(n, n%2 == 0)
		s.Begin(r.Arm, r.Replicate, r.Key)
		if err := s.Put(r); err != nil {
			fmt.Println(err)
			os.Exit(1)
		}
		fmt.Println(n) // on disk from here on
	}
}

// TestKilled kills a writing process outright, at several moments: every run
// that it said was stored is there and sound.
func TestKilled(t *testing.T) {
	path := filepath.Join(t.TempDir(), DefaultPath)
	rounds := 5
	if testing.Short() {
		rounds = 2
	}
	for round := range rounds {
		os.Remove(path)
		cmd := exec.Command(os.Args[0])
		cmd.Env = append(os.Environ(), helperVariable+"="+path)
		var out strings.Builder
		cmd.Stdout = &out
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		time.Sleep(time.Duration(150+130*round) * time.Millisecond)
		cmd.Process.Kill()
		cmd.Wait()
		lines := strings.Split(out.String(), "\n")
		promised := len(lines) - 1 // a last line may be cut
		if promised == 0 {
			t.Log("killed before the first run was stored")
			continue
		}
		if last, err := strconv.Atoi(lines[promised-1]); err != nil || last != promised-1 {
			t.Fatalf("the writer said %q", out.String())
		}
		s := openAt(t, path, Options{})
		for n := range promised {
			got, err := s.Get(keyOf(n))
			if err != nil {
				t.Fatalf("round %d, run %d of %d: %v", round, n, promised, err)
			}
			if got.Digest != results.DigestOf(run(n, n%2 == 0)) {
				t.Fatalf("round %d: run %d came back different", round, n)
			}
		}
		broken, err := s.List(Filter{State: results.BrokenOff})
		if err != nil || len(broken) > 1 {
			t.Errorf("round %d: broken off: %s, %v", round, names(broken), err)
		}
		s.Close()
	}
}
