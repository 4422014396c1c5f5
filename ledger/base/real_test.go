package base_test

import (
	"os"
	"testing"
	"time"

	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger/base"
)

func TestImportOfReconstructedNeurons(t *testing.T) {
	dir := "../../../shared/deliveries/small"
	if d := os.Getenv("FETTLE_DELIVERIES"); d != "" {
		dir = d
	}
	if _, err := os.Stat(dir); err != nil {
		t.Logf("no delivery of real neurons at %s", dir)
		return
	}
	pool := pgtest.New(t)
	report, err := base.Import(t.Context(), pool, dir, base.ImportOptions{})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%+v %v %v", report.Info, report.Warnings, report.Elapsed)
	began := time.Now()
	b, err := base.Open(t.Context(), pool, report.Info.VolumeID)
	if err != nil {
		t.Fatal(err)
	}
	t.Log(time.Since(began))
	for range 2 {
		began = time.Now()
		v, err := b.View(t.Context(), pool, []base.Range{{0, uint32(report.Info.Supervoxels)}})
		if err != nil {
			t.Fatal(err)
		}
		t.Log(time.Since(began), len(v.Contacts), len(v.Outside), len(v.Synapses), len(v.Nuclei))
	}
	g, d, err := b.Nearest(t.Context(), pool, nil, base.Point{45390, 29300, 71532})
	t.Log(g, d, err)
	var size int64
	if err := pool.QueryRow(t.Context(), `select pg_total_relation_size('base_block')`).Scan(&size); err != nil {
		t.Fatal(err)
	}
	t.Log(float64(size) / float64(report.Info.Supervoxels))
}
