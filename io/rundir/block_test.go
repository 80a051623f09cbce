package rundir

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"holdfast/selection"
	"holdfast/solver"
)

// A judgement needs part of the record; here it is derived a second time.
func TestDrawsHoldWhatAJudgementNeeds(t *testing.T) {
	d := hatcheryRun(t, 2)
	paths := []solver.Path{{
		First: -2, Last: 0, Stop: solver.StopEntered,
		Entries:    []solver.Entry{{Candidate: 4, Step: -1, Negative: true}, {Candidate: 0, Step: 0}},
		Coefs:      []solver.Coef{{Step: -1, Candidate: 4, Value: -0.5}, {Step: 0, Candidate: 0, Value: 1}, {Step: 0, Candidate: 4, Value: -1}},
		Intercepts: []float64{1, 2, 3}, Always: []float64{1, 2, 3, 4, 5, 6}, Still: []int32{2, 5}, Violation: 1e-12,
		Deviance: []float64{4, 3, 2}, NullDeviance: 5, Redraws: 2,
	}, {
		First: 18, Last: 20, Stop: solver.StopUncertified, Why: "gap 2e-9", Intercepts: []float64{1, 2, 3},
		Always: []float64{1, 2, 3, 4, 5, 6}, Gap: 1e-13, Borderline: 3, Twins: 1,
	}}
	if err := d.Put(upTo(0, 2), paths); err != nil {
		t.Fatal(err)
	}
	f, err := d.Read()
	if err != nil {
		t.Fatal(err)
	}
	a, b := f.Draws[0], f.Draws[1]
	if a.Number != 0 || a.First != -2 || a.Last != 0 || a.Uncertified || a.Complete {
		t.Errorf("draw 0: %+v", a)
	}
	if b.Number != 1 || !b.Uncertified || !b.Complete || len(b.Entries) != 0 {
		t.Errorf("draw 1: %+v", b)
	}
	if len(a.Entries) != 2 || a.Entries[0] != (selection.Entry{Predictor: 4, Step: -1, Negative: true}) {
		t.Errorf("entries of draw 0: %+v", a.Entries)
	}
	if len(a.Coefs) != 3 || a.Coefs[2] != (selection.Coef{Step: 0, Predictor: 4, Value: -1}) || len(a.Always) != 6 || len(a.Still) != 2 ||
		!slices.Equal(a.Deviance, []float64{4, 3, 2}) || a.NullDeviance != 5 || a.Redraws != 2 {
		t.Errorf("draw 0: %+v", a)
	}
	want := Uncertified{Draw: 1, Step: 21, Why: "gap 2e-9"}
	if f.Violation != 1e-12 || f.Gap != 1e-13 || f.Borderline != 3 || f.Twins != 1 || len(f.Uncertified) != 1 || f.Uncertified[0] != want || f.Certificates[0].Redraws != 2 {
		t.Errorf("certificates: %+v", f)
	}
}

func encoded(t testing.TB, run Run, block []numbered) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := run.encodeBlock(&b, block, sumsOf(block)); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func numberedFrom(first int, paths []solver.Path) []numbered {
	block := make([]numbered, len(paths))
	for i := range paths {
		block[i] = numbered{first + i, paths[i]}
	}
	return block
}

func TestEqualDrawsGiveEqualBytes(t *testing.T) {
	run := hatcheryRun(t, 8).Run()
	block := numberedFrom(0, randomPaths(source(t), 8))
	if !bytes.Equal(encoded(t, run, block), encoded(t, run, block)) {
		t.Error("two writes differ")
	}
}

// The bytes and the digest of two small blocks, computed by this package when
// the format was fixed. Another value here is another format: it needs
// another Format number, or runs on disk can no longer be gone on with.
func TestFormatOfABlockIsFixed(t *testing.T) {
	single := Run{Digest: strings.Repeat("ab", 32)}
	checkFormat(t, single, []solver.Path{
		{First: 1, Last: 2, Stop: solver.StopEntered, Violation: 1e-12, Gap: 2e-13, Twins: 1, Redraws: 3,
			Entries:    []solver.Entry{{Candidate: 3, Step: 1, Negative: true}},
			Coefs:      []solver.Coef{{Step: 1, Candidate: 3, Value: -0.25}, {Step: 2, Candidate: 3, Value: -0.5}},
			Intercepts: []float64{3, 3.5}, Always: []float64{1, 2}, Still: []int32{0}, Deviance: []float64{0.5, 0.25}, NullDeviance: 0.75},
		{First: 1, Last: 0, Stop: solver.StopUncertified, Why: "constant outcome"},
	}, "b1f0d6a3fe80f28e4f8dd418410e4ff5fb5ab043e7ec2d5ff6ebf90478f0ce1e", "b14744df207f082cca3f24c338be489d272df1d9d6c9ce391c01e48dd487c922")
	several := Run{Digest: strings.Repeat("cd", 32), Identity: kinds()["classes"]}
	checkFormat(t, several, []solver.Path{
		{First: 0, Last: 0, Entries: []solver.Entry{{Candidate: 3}},
			Coefs:      []solver.Coef{{Candidate: 3, Term: 0, Class: 2, Value: 1}, {Candidate: 3, Term: 2, Class: 0, Value: -1}},
			Intercepts: []float64{1, -1, 0}, Deviance: []float64{2}, NullDeviance: 3},
	}, "ab7a5563a0a03475f0dd19b0e440402f901fe93b5daf4da5746148241997df7d", "45ea3b31130e151663e940ae8dabd737b3440cdca7b8cee1bd4dc5ae2de6bd9c")
}

func checkFormat(t *testing.T, run Run, paths []solver.Path, bytes, draws string) {
	t.Helper()
	block := numberedFrom(6, paths)
	whole := sha256.Sum256(encoded(t, run, block))
	check(t, "bytes", hex.EncodeToString(whole[:]), bytes)
	check(t, "draws", blockDigest(run.Digest, sumsOf(block)), draws)
}

func check(t *testing.T, what, got, want string) {
	t.Helper()
	if got != want {
		t.Errorf("%s: %s, not %s", what, got, want)
	}
}

// decodeBytes reads a block from memory.
func decodeBytes(run *Run, text []byte) ([]numbered, error) {
	block, _, err := run.decodeBlock(bytes.NewReader(text), int64(len(text)))
	return block, err
}

// Whatever is damaged is found. Every bit of a block flips once; and a range of
// bytes that begins at each, 1 to 4,096 long, is zeroed, set, or turned round.
func TestDamageOfEveryByteRangeIsFound(t *testing.T) {
	for _, name := range []string{"number", "classes"} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			r := source(t)
			run := runOf(t, kinds()[name], 4).Run()
			text := encoded(t, run, numberedFrom(0, shortPaths(r, forms[name])))
			if _, err := decodeBytes(&run, text); err != nil {
				t.Fatalf("the whole block: %v", err)
			}
			everyDamage(r, text, func(what string, numbers ...any) {
				t.Helper()
				_, err := decodeBytes(&run, text)
				if err == nil || errors.Is(err, ErrForeign) {
					t.Fatalf(what+": %v", append(numbers, err)...)
				}
			})
		})
	}
}

// shortPaths are two draws with something in every list, and little in all.
func shortPaths(r *rand.Rand, f form) []solver.Path {
	for {
		p := f.randomPaths(r, 2)
		n := len(p[0].Coefs) + len(p[1].Coefs)
		if n > 4 && n < 30 && len(p[0].Deviance)+len(p[1].Deviance) > 0 && len(p[0].Still)+len(p[1].Still) > 0 {
			return p
		}
	}
}

// everyDamage calls check for each damage that it does to text.
func everyDamage(r *rand.Rand, text []byte, check func(what string, numbers ...any)) {
	for i := range text {
		for bit := range 8 {
			text[i] ^= 1 << bit
			check("bit %d of byte %d flipped", bit, i)
			text[i] ^= 1 << bit
		}
	}
	spoil := []func(byte) byte{func(byte) byte { return 0 }, func(byte) byte { return 0xff }, func(b byte) byte { return ^b }}
	whole := bytes.Clone(text)
	for i := range text {
		how, end := r.IntN(len(spoil)), min(i+1<<r.IntN(13), len(text))
		for k := i; k < end; k++ {
			text[k] = spoil[how](text[k])
		}
		if !bytes.Equal(text, whole) {
			check("bytes %d to %d spoiled", i, end-1)
		}
		copy(text, whole)
	}
}

func TestTruncatedBlocksAreFound(t *testing.T) {
	run := hatcheryRun(t, 4).Run()
	text := encoded(t, run, numberedFrom(0, randomPaths(source(t), 4)))
	for n := range text {
		if _, err := decodeBytes(&run, text[:n]); err == nil {
			t.Fatalf("%d of %d bytes were taken for a whole block", n, len(text))
		}
	}
}

// Without the digest of the file (as if damage had also repaired it), the
// decoder itself and the digest of the draws must find what changes a draw.
func TestDigestOfDrawsFindsWhatIsHidden(t *testing.T) {
	for name, draws := range map[string]int{"number": 4, "classes": 2} {
		r := source(t)
		run := runOf(t, kinds()[name], 4).Run()
		block := numberedFrom(0, forms[name].randomPaths(r, draws))
		text := encoded(t, run, block)
		footer, err := footerStart(bytes.NewReader(text), int64(len(text)))
		if err != nil {
			t.Fatal(err)
		}
		found := 0
		for i := 4; i < int(footer); i += 4 {
			bit := byte(1) << r.IntN(8)
			changed := bytes.Clone(text)
			changed[i] ^= bit
			got, err := decodeUnsealed(&run, changed)
			if err != nil {
				found++
				continue
			}
			for k := range got {
				if !sameBits(got[k].path, block[k].path) {
					t.Fatalf("byte %d, bit %08b: draw %d differs and nobody noticed", i, bit, block[k].number)
				}
			}
		}
		if found < 100 {
			t.Errorf("%d changes found", found)
		}
	}
}

func TestBadBlocksAreRefused(t *testing.T) {
	good := func() solver.Path {
		return solver.Path{First: 0, Last: 1, Intercepts: []float64{1, 2}, Always: []float64{1, 2, 3, 4},
			Entries: []solver.Entry{{Candidate: 1, Step: 0}}, Coefs: []solver.Coef{{Step: 0, Candidate: 1, Value: 1}, {Step: 1, Candidate: 1, Value: 2}}}
	}
	cases := map[string]func(*solver.Path){
		"entry beyond the candidates": func(p *solver.Path) { p.Entries[0].Candidate = 6 },
		"negative candidate":          func(p *solver.Path) { p.Entries[0].Candidate = -1 },
		"entry before the first step": func(p *solver.Path) { p.Entries[0].Step = -1 },
		"entered twice":               func(p *solver.Path) { p.Entries = append(p.Entries, solver.Entry{Candidate: 1, Step: 1}) },
		"coefficient twice":           func(p *solver.Path) { p.Coefs[1].Step = 0 },
		"coefficient after the last":  func(p *solver.Path) { p.Coefs[1].Step = 2 },
		"intercepts short":            func(p *solver.Path) { p.Intercepts = p.Intercepts[:1] },
		"always short":                func(p *solver.Path) { p.Always = p.Always[:3] },
		"still out of order":          func(p *solver.Path) { p.Still = []int32{3, 3} },
		"stop without meaning":        func(p *solver.Path) { p.Stop = 9 },
		"absurd step":                 func(p *solver.Path) { p.Last = 1 << 40 },
	}
	d := hatcheryRun(t, 4)
	if err := d.Put([]int{0}, []solver.Path{good()}); err != nil {
		t.Fatalf("the good path: %v", err)
	}
	for name, spoil := range cases {
		p := good()
		spoil(&p)
		if err := d.Put([]int{1}, []solver.Path{p}); err == nil {
			t.Errorf("%s: written", name)
		}
	}
	if err := d.Put([]int{4}, []solver.Path{good()}); err == nil {
		t.Error("draw 4 of 4 was written")
	}
	if err := d.Put(nil, nil); err == nil {
		t.Error("an empty block was written")
	}
}

func TestMissingDamagedForeignAndDoubleBlocks(t *testing.T) {
	r := source(t)
	d := hatcheryRun(t, 12)
	paths := randomPaths(r, 12)
	for first := 0; first < 12; first += 4 {
		if err := d.Put(upTo(first, first+4), paths[first:first+4]); err != nil {
			t.Fatal(err)
		}
	}
	block := func(first int) string { return d.join(drawsFolder, blockName(first)) }
	copyFile := func(from, to string) {
		text, err := os.ReadFile(from)
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(to, text, 0o644); err != nil {
			t.Fatal(err)
		}
	}

	// A draw that a second block holds with the same bits counts once.
	if err := d.Put(upTo(2, 6), paths[2:6]); err != nil {
		t.Fatal(err)
	}
	draws, err := d.Draws()
	if err != nil || len(draws) != 12 {
		t.Fatalf("overlapping equal blocks: %d draws, %v", len(draws), err)
	}
	for i := range draws {
		if draws[i].Number != i {
			t.Fatalf("draw %d stands at place %d", draws[i].Number, i)
		}
	}

	// One that differs is an error that names both files.
	other := append([]solver.Path{}, paths[2:6]...)
	other[0].Violation = 5e-11
	if err := d.Put(upTo(2, 6), other); err != nil {
		t.Fatal(err)
	}
	_, err = d.Draws()
	differs := d.join(drawsFolder, otherName(2, blockDigest(d.Run().Digest, sumsOf(numberedFrom(2, other)))))
	if err == nil || !strings.Contains(err.Error(), block(0)) || !strings.Contains(err.Error(), differs) {
		t.Errorf("blocks that disagree: %v", err)
	}
	os.Remove(differs)
	os.Remove(block(2))

	// A block under another name is a copy that somebody made.
	copyFile(block(4), block(5))
	if f, err := d.Read(); err != nil || len(f.Damaged) != 1 || !strings.Contains(f.Damaged[0].Err.Error(), block(5)) {
		t.Errorf("renamed block: %+v, %v", f, err)
	}
	os.Remove(block(5))

	// What is not finished, and what is no block, is no concern of ours.
	copyFile(block(4), d.join(drawsFolder, tempName(blockName(4))))
	copyFile(block(4), d.join(drawsFolder, "notes.txt"))
	if draws, err = d.Draws(); err != nil || len(draws) != 12 {
		t.Errorf("temporary files: %d draws, %v", len(draws), err)
	}

	// Damage and loss are listed, and what is whole is still read.
	text, _ := os.ReadFile(block(4))
	text[len(text)/3] ^= 4
	os.WriteFile(block(4), text, 0o644)
	os.Remove(block(8))
	f, err := d.Read()
	if err != nil {
		t.Fatal(err)
	}
	if len(f.Draws) != 4 || len(f.Missing) != 8 || len(f.Damaged) != 1 || f.Damaged[0].Path != block(4) {
		t.Errorf("damage: %d draws, missing %v, damaged %v", len(f.Draws), f.Missing, f.Damaged)
	}
	_, err = d.Draws()
	if !errors.Is(err, ErrIncomplete) || !strings.Contains(err.Error(), block(4)) || !strings.Contains(err.Error(), "4-11") {
		t.Errorf("damage: %v", err)
	}

	// A block of another run is named.
	id := hatcheryIdentity()
	id.Draws.Seed = 2
	foreign, err := Create(filepath.Join(t.TempDir(), "other.run"), id, nil, hatcheryMeta(12))
	if err != nil {
		t.Fatal(err)
	}
	if err := foreign.SetDecision(hatcheryDecision()); err != nil {
		t.Fatal(err)
	}
	if err := foreign.Put(upTo(8, 12), paths[8:]); err != nil {
		t.Fatal(err)
	}
	copyFile(foreign.join(drawsFolder, blockName(8)), block(8))
	if _, err = d.Draws(); !errors.Is(err, ErrForeign) || !strings.Contains(err.Error(), block(8)) {
		t.Errorf("foreign block: %v", err)
	}
}

func TestBlockNames(t *testing.T) {
	for _, first := range []int{0, 7, 999999, 1000000} {
		if got, ok := blockNumber(blockName(first)); !ok || got != first {
			t.Errorf("%s is read as %d, %v", blockName(first), got, ok)
		}
	}
	tagged := otherName(12, strings.Repeat("0a", 32))
	if got, ok := blockNumber(tagged); !ok || got != 12 {
		t.Errorf("%s is read as %d, %v", tagged, got, ok)
	}
	for _, name := range []string{"block-000012-.parquet", "block-000012-0a.parquet", "block-12-0a0a0a0a0a0a0a0a.parquet", "block-1.parquet", "block-0000001.parquet", "block-+00001.parquet", "block-000001.parquet.bak", "block--00001.parquet", ""} {
		if _, ok := blockNumber(name); ok {
			t.Errorf("%q is taken for a block", name)
		}
	}
}

// A block file that is there is never replaced: not by a smaller block that
// begins with the same draw, and not by the same block once more.
func TestNoBlockIsReplaced(t *testing.T) {
	for _, fsys := range []files{disk{}, unlinked{}} {
		paths := randomPaths(source(t), 8)
		d := hatcheryRun(t, 8)
		d.fs = fsys
		put := func(first, end int) {
			t.Helper()
			if err := d.Put(upTo(first, end), paths[first:end]); err != nil {
				t.Fatal(err)
			}
		}
		put(0, 8)
		before, err := os.Stat(d.join(drawsFolder, blockName(0)))
		if err != nil {
			t.Fatal(err)
		}
		put(0, 2)
		put(0, 8)
		put(0, 2)
		after, err := os.Stat(d.join(drawsFolder, blockName(0)))
		if err != nil || !os.SameFile(before, after) || !after.ModTime().Equal(before.ModTime()) {
			t.Errorf("%T: the first block was replaced: %v", fsys, err)
		}
		if draws, err := d.Draws(); err != nil || len(draws) != 8 {
			t.Errorf("%T: %d draws, %v", fsys, len(draws), err)
		}
		if list, _ := filepath.Glob(d.join(drawsFolder, "*")); len(list) != 2 {
			t.Errorf("%T: files %v", fsys, list)
		}
		if err := d.Put([]int{0, 1}, paths[:1]); err == nil {
			t.Errorf("%T: two draws with one path were put", fsys)
		}
	}
}
