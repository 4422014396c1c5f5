package ledger_test

import (
	"bytes"
	"testing"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/proof"
)

func (d *desk) export() []byte {
	d.Helper()
	var out bytes.Buffer
	if err := d.volume.Export(d.Context(), &out); err != nil {
		d.Fatal(err)
	}
	return out.Bytes()
}

// TestAnExportIsVerifiedWithoutTheDatabase exports twice; the second goes on from the first's checkpoint.
func TestAnExportIsVerifiedWithoutTheDatabase(t *testing.T) {
	d := newDesk(t)
	if _, err := proof.VerifyLog(bytes.NewReader(d.export()), proof.Expect{Digest: d.volume.Info().Digest}); err != nil {
		t.Errorf("an empty ledger: %v", err)
	}
	d.post(d.merge(d.ids[0], d.ids[1]))
	d.post(d.merge(d.ids[1], d.ids[2]))
	kept := d.checkpoint()
	d.post(d.reversal(2, d.segment(d.ids[0])))
	r, err := proof.VerifyLog(bytes.NewReader(d.export()), proof.Expect{Since: []byte(kept.Note), Digest: d.volume.Info().Digest})
	if err != nil {
		t.Fatal(err)
	}
	if r.Head.Size != 3 || r.Since != 2 || r.Checkpoints != 3 || r.Head != d.checkpoint().Checkpoint {
		t.Errorf("%+v", r)
	}
}

// TestWhatOwnersOfTheDatabaseForgeIsSeenInTheExport changes what was said, below the ledger, hash and all.
func TestWhatOwnersOfTheDatabaseForgeIsSeenInTheExport(t *testing.T) {
	d := newDesk(t)
	e := d.post(d.merge(d.ids[0], d.ids[1]))
	d.checkpoint()
	rewrite := func(content []byte) {
		if _, err := d.pool.Exec(t.Context(), `alter table entry disable trigger entry_is_final`); err != nil {
			t.Fatal(err)
		}
		if _, err := d.pool.Exec(t.Context(), `update entry set content = $1 where position = 1`, content); err != nil {
			t.Fatal(err)
		}
	}
	rewrite(bytes.Replace(e.Content, []byte("alder"), []byte("birch"), 1))
	_, err := proof.VerifyLog(bytes.NewReader(d.export()), proof.Expect{})
	d.refused(err, fault.Conflict, "history-rewritten")
	rewrite(e.Content)
}
