package api_test

import (
	"fmt"
	"net/http"
	"slices"
	"strings"
	"testing"

	"github.com/google/uuid"

	"fettle.example/fettle/api"
)

// m is a JSON object.
type m = map[string]any

// TestADay walks through every operation of the contract as a team would use it; at the end each has answered.
func TestADay(t *testing.T) {
	h := newHouse(t)
	h.peopleAndTokens()
	h.reading()
	h.correcting()
	h.working()
	h.leading()
	h.proving()
	for path, item := range h.doc.Paths.Map() {
		for method, op := range item.Operations() {
			if !h.seen[op.OperationID] {
				t.Errorf("no test has had an answer from %s %s (%s)", method, path, op.OperationID)
			}
		}
	}
}

func (h *house) peopleAndTokens() {
	if me := read[api.Person](h, h.must(200, "alder", "GET", "/v1/me", nil)); me.Handle != "alder" {
		h.Errorf("alder is %+v", me)
	}
	h.must(201, "rowan", "POST", "/v1/people", m{"handle": "cedar", "roles": []string{"proofreader"}})
	h.refused(409, "handle-taken", "rowan", "POST", "/v1/people", m{"handle": "cedar", "roles": []string{}})
	issued := read[api.IssuedToken](h, h.must(201, "rowan", "POST", "/v1/people/cedar/tokens", m{"note": "laptop"}))
	h.tokens["cedar"] = issued.Secret
	h.must(200, "cedar", "GET", "/v1/me", nil)
	if list := read[api.Tokens](h, h.must(200, "cedar", "GET", "/v1/people/cedar/tokens", nil)); len(list.Items) != 1 || strings.Contains(fmt.Sprint(list), issued.Secret) {
		h.Errorf("cedar's tokens: %+v", list)
	}
	h.refused(403, "token-of-another", "alder", "GET", "/v1/people/cedar/tokens", nil)
	h.must(200, "cedar", "DELETE", "/v1/people/cedar/tokens/"+issued.Token.Id.String(), nil)
	h.refused(401, "token-unknown", "cedar", "GET", "/v1/me", nil)
	h.refused(401, "token-missing", "", "GET", "/v1/me", nil)
	h.must(200, "rowan", "PATCH", "/v1/people/cedar", m{"roles": []string{"reviewer"}})
	if p := read[api.Person](h, h.must(200, "rowan", "PATCH", "/v1/people/cedar", m{"left": true})); !p.Left {
		h.Errorf("cedar has left: %+v", p)
	}
	if list := read[api.People](h, h.must(200, "rowan", "GET", "/v1/people", nil)); len(list.Items) != len(team)+1 {
		h.Errorf("%d people", len(list.Items))
	}
}

func (h *house) reading() {
	if list := read[api.Volumes](h, h.must(200, "nobody", "GET", "/v1/volumes", nil)); len(list.Items) != 1 {
		h.Errorf("volumes: %+v", list)
	}
	v := read[api.Volume](h, h.must(200, "nobody", "GET", "", nil))
	if v.Supervoxels != supervoxels || v.TriagePosition != 0 || v.TasksPosition != 0 {
		h.Errorf("volume: %+v", v)
	}
	// The hard ids come back exactly: beyond a double, beyond a signed number, the last.
	for _, id := range []string{"9007199254740993", "9223372036854775808", "18446744073709551615"} {
		one := read[api.LookupItem](h, h.must(200, "nobody", "GET", "/supervoxels/"+id, nil))
		many := read[api.Lookup](h, h.must(200, "nobody", "POST", "/lookups", m{"supervoxels": []string{id}, "at": "0"}))
		if one.Supervoxel != id || many.Items[0] != one {
			h.Errorf("%s came back as %+v, %+v", id, one, many)
		}
		seg := read[api.Segment](h, h.must(200, "nobody", "GET", "/segments/"+one.Segment, nil))
		if !seg.Current || seg.Id != one.Segment || len(seg.Became) != 1 {
			h.Errorf("segment %+v", seg)
		}
		h.must(200, "nobody", "GET", "/segments/"+one.Segment+"/history", nil)
		h.pagesOfMembers(seg)
	}
	near := read[api.Nearest](h, h.must(200, "nobody", "GET", "/nearest?x=100&y=200&z=300", nil))
	within := read[api.Nearest](h, h.must(200, "nobody", "GET", "/nearest?x=100&y=200&z=300&segment="+near.Segment, nil))
	if near != within {
		h.Errorf("nearest %+v, in its own segment %+v", near, within)
	}
	h.refused(404, "volume-unknown", "nobody", "GET", "/v1/volumes/nowhere", nil)
	h.refused(404, "supervoxel-unknown", "nobody", "GET", "/supervoxels/12345", nil)
	h.refused(404, "segment-unknown", "nobody", "GET", "/segments/12345", nil)
	h.refused(404, "position-unknown", "nobody", "GET", "/supervoxels/18446744073709551615?at=7", nil)
	h.refused(400, "at-malformed", "nobody", "GET", "/supervoxels/18446744073709551615?at=yesterday", nil)
	h.refused(400, "id-malformed", "nobody", "GET", "/supervoxels/18446744073709551616", nil)
	h.refused(400, "request-invalid", "nobody", "GET", "/supervoxels/007", nil)
	h.refused(400, "parameter-unknown", "nobody", "GET", "/tasks?stat=open", nil)
	h.refused(404, "path-unknown", "nobody", "GET", "/v1/nothing", nil)
	h.refused(405, "method-unknown", "nobody", "DELETE", "/v1/me", nil)
	if q := h.must(200, "rowan", "GET", "/quality?at=0", nil); read[api.Quality](h, q).ScoredVoxels == 0 {
		h.Errorf("quality: %s", q.body)
	}
	if list := read[api.Detectors](h, h.must(200, "nobody", "GET", "/v1/detectors", nil)); len(list.Items) < 6 {
		h.Errorf("detectors: %+v", list)
	}
	h.pagesOfFindings()
}

func (h *house) pagesOfMembers(seg api.Segment) {
	h.Helper()
	seen := make(map[string]bool)
	for cursor := ""; ; {
		page := read[api.Members](h, h.must(200, "nobody", "GET", "/segments/"+seg.Id+"/members?limit=2"+cursor, nil))
		for _, id := range page.Items {
			if seen[id] {
				h.Fatalf("%s is on two pages", id)
			}
			seen[id] = true
		}
		if page.Next == nil {
			break
		}
		cursor = "&cursor=" + *page.Next
	}
	if int64(len(seen)) != seg.Totals.Supervoxels {
		h.Errorf("segment %s holds %d, and its pages %d", seg.Id, seg.Totals.Supervoxels, len(seen))
	}
}

func (h *house) pagesOfFindings() {
	h.Helper()
	all := read[api.Findings](h, h.must(200, "nobody", "GET", "/findings?limit=1000", nil))
	id := func(f api.Finding) string { return *f.Id }
	var whole, paged []string
	for _, f := range all.Items {
		whole = append(whole, id(f))
	}
	for cursor := ""; ; {
		page := read[api.Findings](h, h.must(200, "nobody", "GET", "/findings?limit=3"+cursor, nil))
		for _, f := range page.Items {
			paged = append(paged, id(f))
		}
		if page.Next == nil {
			break
		}
		cursor = "&cursor=" + *page.Next
	}
	if len(whole) == 0 || !slices.Equal(whole, paged) {
		h.Errorf("findings %v at once, %v page by page", whole, paged)
	}
	h.refused(400, "cursor-malformed", "nobody", "GET", "/findings?cursor=x", nil)
}

// apart are two supervoxels in different segments.
func (h *house) apart() (a, b api.LookupItem) {
	h.Helper()
	a = read[api.LookupItem](h, h.must(200, "nobody", "GET", "/supervoxels/18446744073709551615", nil))
	for _, id := range []string{"9007199254740993", "9223372036854775808", "9007199254740994"} {
		if b = read[api.LookupItem](h, h.must(200, "nobody", "GET", "/supervoxels/"+id, nil)); b.Segment != a.Segment {
			return a, b
		}
	}
	h.Fatal("all in one segment")
	return a, b
}

func (h *house) correcting() {
	a, b := h.apart()
	h.must(201, "alder", "POST", "/neurons", m{"name": "N1", "anchor": m{"supervoxel": a.Supervoxel}})
	h.refused(409, "neuron-exists", "alder", "POST", "/neurons", m{"name": "N1", "anchor": m{"supervoxel": b.Supervoxel}})
	merge := m{"a": m{"supervoxel": a.Supervoxel}, "b": m{"supervoxel": b.Supervoxel}, "expected": []string{a.Segment, b.Segment}, "reason": "one neurite"}
	if p := read[api.MergePreview](h, h.must(200, "nobody", "POST", "/merges/preview", merge)); len(p.Segments) != 2 {
		h.Errorf("preview: %+v", p)
	}
	h.refused(400, "request-invalid", "alder", "POST", "/merges", merge) // without a key
	h.refused(400, "key-malformed", "alder", "POST", "/merges", merge, "Idempotency-Key", strings.Repeat("x", 36))
	once := key()
	first := h.must(201, "alder", "POST", "/merges", merge, once...)
	again := h.must(201, "alder", "POST", "/merges", merge, "Idempotency-Key", `"`+once[1]+`"`)
	e := read[api.Entry](h, first)
	if e.Position != 1 || string(again.body) != string(first.body) || e.Id.String() != once[1] {
		h.Errorf("sent twice: %s and %s", first.body, again.body)
	}
	stale := h.refused(409, "segment-retired", "alder", "POST", "/merges", merge, key()...)
	if fmt.Sprint(stale["current"]) != fmt.Sprint([]any{e.After[0]}) || len(stale["entries"].([]any)) != 1 || stale["next_step"] == "" {
		h.Errorf("a stale id is answered with %v", stale)
	}
	whole := e.After[0]
	split := m{"groups": []any{[]any{m{"supervoxel": a.Supervoxel}}, []any{m{"supervoxel": b.Supervoxel}}}, "expected": []string{whole}}
	foreseen := read[api.SplitPreview](h, h.must(200, "nobody", "POST", "/splits/preview", split))
	parted := read[api.Entry](h, h.must(201, "agent-1", "POST", "/splits", split, key()...))
	if len(foreseen.Sides) != len(parted.After) || parted.Cost == nil || *parted.Cost != foreseen.Cost || len(*parted.Seeds) != 2 {
		h.Errorf("foreseen %+v, posted %+v", foreseen, parted)
	}
	h.refused(403, "role-missing", "alder", "POST", "/reversals", m{"position": 2, "expected": parted.After}, key()...)
	back := read[api.Entry](h, h.must(201, "rowan", "POST", "/reversals", m{"position": 2, "expected": parted.After, "reason": "one after all"}, key()...))
	if back.Kind != api.EntryKindReversal || *back.Reverses != 2 {
		h.Errorf("reversal %+v", back)
	}
	h.refused(409, "already-reversed", "rowan", "POST", "/reversals", m{"position": 2, "expected": back.After}, key()...)

	h.refused(400, "text-malformed", "nobody", "GET", "/entries?person=%00", nil)

	for path, want := range map[string]int{"/entries": 3, "/entries?person=alder": 1, "/entries?kind=split": 1, "/entries?after=1": 2, "/entries?before=2": 1, "/entries?order=newest&limit=2": 2} {
		if list := read[api.Entries](h, h.must(200, "nobody", "GET", path, nil)); len(list.Items) != want {
			h.Errorf("%s: %d entries, want %d", path, len(list.Items), want)
		}
	}
	newest := read[api.Entries](h, h.must(200, "nobody", "GET", "/entries?order=newest&limit=2", nil))
	rest := read[api.Entries](h, h.must(200, "nobody", "GET", "/entries?order=newest&limit=2&cursor="+*newest.Next, nil))
	if len(rest.Items) != 1 || rest.Items[0].Position != 1 || rest.Next != nil {
		h.Errorf("the second page holds %+v", rest)
	}
	one := read[api.Entry](h, h.must(200, "nobody", "GET", "/entries/2", nil))
	if one.Content == nil || !strings.Contains(*one.Content, `"kind":"split"`) {
		h.Errorf("entry 2: %+v", one)
	}
	h.refused(404, "position-unknown", "nobody", "GET", "/entries/9", nil)

	then := read[api.Neuron](h, h.must(200, "nobody", "GET", "/neurons/N1?at=0", nil))
	now := read[api.Neuron](h, h.must(200, "nobody", "GET", "/neurons/N1", nil))
	list := read[api.Neurons](h, h.must(200, "nobody", "GET", "/neurons", nil))
	if then.Segment != a.Segment || now.Segment != back.After[0] || len(list.Items) != 1 || list.Items[0] != now {
		h.Errorf("N1 was in %s, is in %s", then.Segment, now.Segment)
	}
	h.pagesOfAHistory()
	h.follow()
}

// pagesOfAHistory reads the neuron's history whole, and in two pages.
func (h *house) pagesOfAHistory() {
	h.Helper()
	whole := read[api.Entries](h, h.must(200, "nobody", "GET", "/neurons/N1/history", nil))
	first := read[api.Entries](h, h.must(200, "nobody", "GET", "/neurons/N1/history?limit=2", nil))
	if len(whole.Items) != 3 || whole.Next != nil || len(first.Items) != 2 || first.Next == nil {
		h.Fatalf("N1's history: %d entries, %d on the first page", len(whole.Items), len(first.Items))
	}
	rest := read[api.Entries](h, h.must(200, "nobody", "GET", "/neurons/N1/history?limit=2&cursor="+*first.Next, nil))
	if len(rest.Items) != 1 || rest.Items[0].Position != whole.Items[2].Position || rest.Next != nil {
		h.Errorf("the second page: %+v", rest)
	}
	h.refused(400, "cursor-malformed", "nobody", "GET", "/neurons/N1/history?cursor=99", nil)
	if all := read[api.Neurons](h, h.must(200, "nobody", "GET", "/neurons?limit=1", nil)); len(all.Items) != 1 || all.Next != nil {
		h.Errorf("one neuron on one page: %+v", all)
	}
}

func (h *house) working() {
	once := key()
	task := read[api.Task](h, h.must(201, "alder", "POST", "/claims", m{}, once...))
	if again := read[api.Task](h, h.must(201, "alder", "POST", "/claims", m{}, once...)); again.Number != task.Number || again.Claim.Id != task.Claim.Id {
		h.Errorf("claimed twice: %d and %d", task.Number, again.Number)
	}
	h.refused(409, "claim-held", "alder", "POST", "/claims", m{}, key()...)
	if held := read[api.Tasks](h, h.must(200, "alder", "GET", "/claims", nil)); len(held.Items) != 1 {
		h.Errorf("alder holds %+v", held)
	}
	claim := "/claims/" + task.Claim.Id.String()
	h.must(200, "alder", "POST", claim+"/extend", nil)
	h.refused(403, "claim-of-another", "birch", "POST", claim+"/extend", nil)
	for way, body := range map[string]any{"/extend": nil, "/release": m{"reason": "no"}, "/resolve": m{"outcome": "sound"}} {
		h.refused(404, "claim-unknown", "alder", "POST", "/v1/volumes/another"+claim+way, body)
	}
	h.must(200, "alder", "POST", claim+"/release", m{"reason": "the images end here"})
	h.refused(410, "claim-ended", "alder", "POST", claim+"/extend", nil)

	task = h.claimMerge("alder")
	claim = "/claims/" + task.Claim.Id.String()
	h.refused(400, "correction-missing", "alder", "POST", claim+"/resolve", m{"outcome": "corrected"})
	merge := m{"a": m{"supervoxel": *task.Proposal.A}, "b": m{"supervoxel": *task.Proposal.B}, "expected": task.Segments}
	done := read[api.TaskDone](h, h.must(200, "alder", "POST", claim+"/resolve", m{"outcome": "corrected", "note": "it goes on", "merge": merge}))
	if done.Entry == nil || done.Task.State != api.TaskStateResolved || *done.Task.Resolution.Position != done.Entry.Position || *done.Entry.Task != task.Id {
		h.Errorf("resolved: %+v", done)
	}
	path := fmt.Sprintf("/tasks/%d", task.Number)
	h.refused(403, "role-missing", "alder", "POST", path+"/review", m{"verdict": "accept"})
	if waiting := read[api.Tasks](h, h.must(200, "birch", "GET", "/reviews", nil)); len(waiting.Items) != 1 {
		h.Errorf("waiting for birch: %+v", waiting)
	}
	back := read[api.TaskDone](h, h.must(200, "birch", "POST", path+"/review", m{"verdict": "return", "note": "two cells"}))
	if back.Entry == nil || back.Task.State != api.TaskStateReturned || *back.Entry.Reverses != done.Entry.Position {
		h.Errorf("returned: %+v", back)
	}
	one := read[api.Task](h, h.must(200, "nobody", "GET", path, nil))
	if one.Events == nil || len(*one.Events) < 4 {
		h.Errorf("the task's history: %+v", one.Events)
	}
	h.follow()

	own := h.claimMerge("birch")
	h.must(200, "birch", "POST", "/claims/"+own.Claim.Id.String()+"/resolve", m{"outcome": "sound"})
	h.refused(403, "review-own", "birch", "POST", fmt.Sprintf("/tasks/%d/review", own.Number), m{"verdict": "accept"})
	h.must(200, "rowan", "POST", fmt.Sprintf("/tasks/%d/review", own.Number), m{"verdict": "accept"})
}

// claimMerge claims a task that proposes a merge.
func (h *house) claimMerge(who string) api.Task {
	h.Helper()
	t := read[api.Task](h, h.must(201, who, "POST", "/claims", m{"kinds": []string{"false-split"}}, key()...))
	if t.Proposal == nil || t.Proposal.A == nil {
		h.Fatalf("no proposal in %+v", t)
	}
	return t
}

func (h *house) leading() {
	open := read[api.Tasks](h, h.must(200, "rowan", "GET", "/tasks?state=open&limit=1", nil))
	if len(open.Items) != 1 || open.Next == nil {
		h.Fatalf("open tasks: %+v", open)
	}
	number := open.Items[0].Number
	if n := read[api.Assigned](h, h.must(200, "rowan", "POST", "/assignments", m{"to": "alder", "tasks": []int64{number}})); n.Count != 1 {
		h.Errorf("assigned %+v", n)
	}
	if list := read[api.Tasks](h, h.must(200, "rowan", "GET", "/tasks?assigned_to=alder", nil)); len(list.Items) != 1 {
		h.Errorf("alder has %d tasks", len(list.Items))
	}
	h.must(200, "rowan", "POST", "/assignments/withdraw", m{"tasks": []int64{number}})
	if n := read[api.Assigned](h, h.must(200, "rowan", "POST", "/assignments", m{"to": "birch", "best": m{"count": 2}})); n.Count != len(*n.Tasks) {
		h.Errorf("assigned the best: %+v", n)
	}
	h.refused(400, "assignment-malformed", "rowan", "POST", "/assignments", m{"to": "alder"})
	q := read[api.Queue](h, h.must(200, "rowan", "GET", "/queue", nil))
	if q.States["open"] == 0 || !strings.Contains(q.Notice, "personal data") {
		h.Errorf("queue: %+v", q)
	}
	all := read[api.Throughput](h, h.must(200, "rowan", "GET", "/throughput?zone=Europe/Madrid", nil))
	if len(all.Items) != 2 || !strings.Contains(all.Notice, "personal data") {
		h.Errorf("throughput: %+v", all)
	}
	if own := read[api.Throughput](h, h.must(200, "alder", "GET", "/throughput", nil)); len(own.Items) != 1 || own.Items[0].Person != "alder" || own.Items[0].Returned != 1 {
		h.Errorf("alder's own: %+v", own)
	}
	h.refused(403, "throughput-of-another", "alder", "GET", "/throughput?person=birch", nil)
	h.refused(400, "zone-unknown", "alder", "GET", "/throughput?zone=Nowhere", nil)
}

// TestWhoMayDoWhat asks every operation as everybody. Who lacks the role is told so before anything is looked at, and who has it
// gets some other answer.
func TestWhoMayDoWhat(t *testing.T) {
	h := newHouse(t)
	forbidden := map[string]string{ // operation: who must be refused
		"ClaimTask": "rowan nobody agent-1", "ListClaims": "rowan nobody agent-1", "ExtendClaim": "rowan nobody agent-1",
		"ReleaseClaim": "rowan nobody agent-1", "ResolveClaim": "rowan nobody agent-1",
		"ListReviews": "alder nobody agent-1", "ReviewTask": "alder nobody agent-1",
		"PostMerge": "nobody", "PostSplit": "nobody", "PostReversal": "alder nobody", "AddNeuron": "nobody",
		"GetQueue": "nobody agent-1", "AssignTasks": "alder birch nobody agent-1", "WithdrawTasks": "alder birch nobody agent-1",
		"GetQuality": "alder birch nobody agent-1", "ListPeople": "alder birch nobody agent-1", "AddPerson": "alder birch nobody agent-1",
		"ChangePerson": "alder birch nobody agent-1",
	}
	bodies := map[string]any{
		"ClaimTask": m{"task": 1}, "ReleaseClaim": m{"reason": "x"}, "ResolveClaim": m{"outcome": "sound"}, "ReviewTask": m{"verdict": "accept"},
		"PostMerge": m{"a": m{"supervoxel": "1"}, "b": m{"supervoxel": "2"}, "expected": []string{"1"}}, "PostSplit": m{"groups": []any{}, "expected": []string{"1"}},
		"PostReversal": m{"position": 1, "expected": []string{"1"}}, "AddNeuron": m{"name": "x", "anchor": m{"supervoxel": "1"}},
		"AssignTasks": m{"to": "alder"}, "WithdrawTasks": m{"tasks": []int{}}, "AddPerson": m{"handle": "x y", "roles": []string{}}, "ChangePerson": m{},
		"IssueToken": m{}, "LookUp": m{"supervoxels": []string{}},
	}
	bodies["PreviewMerge"], bodies["PreviewSplit"] = bodies["PostMerge"], bodies["PostSplit"]
	for path, item := range h.doc.Paths.Map() {
		path = strings.NewReplacer("{volume}", h.volume.Name(), "{handle}", "nobody", "{token}", uuid.NewString(), "{claim}", uuid.NewString(),
			"{supervoxel}", "1", "{segment}", "1", "{position}", "9", "{number}", "999", "{name}", "none").Replace(path)
		for method, op := range item.Operations() {
			query := ""
			if op.OperationID == "GetNearest" {
				query = "?x=1&y=1&z=1"
			}
			h.refused(http.StatusUnauthorized, "token-missing", "", method, path+query, bodies[op.OperationID], key()...)
			for who := range team {
				a := h.ask(who, method, path+query, bodies[op.OperationID], key()...)
				refused := a.status == http.StatusForbidden && strings.Contains(string(a.body), `"role-missing"`)
				if want := strings.Contains(" "+forbidden[op.OperationID]+" ", " "+who+" "); refused != want {
					t.Errorf("%s as %s: %d %s", op.OperationID, who, a.status, a.body)
				}
				if a.status >= 500 {
					t.Errorf("%s as %s: %d %s", op.OperationID, who, a.status, a.body)
				}
			}
		}
	}
}

// TestNothingLeaks breaks the database under the server: the answer says nothing of it.
func TestNothingLeaks(t *testing.T) {
	h := newHouse(t)
	if _, err := h.owner.Exec(t.Context(), `alter table neuron rename to gone`); err != nil {
		t.Fatal(err)
	}
	p := h.refused(500, "internal", "nobody", "GET", "/neurons", nil)
	for _, word := range []string{"neuron\"", "relation", "SQLSTATE", "select"} {
		if strings.Contains(fmt.Sprint(p), word) {
			t.Errorf("the answer says %q: %v", word, p)
		}
	}
}

func TestHealthAndMetrics(t *testing.T) {
	h := newHouse(t)
	h.must(200, "nobody", "GET", "/v1/me", nil)
	for path, want := range map[string]string{"/healthz": "ok", "/readyz": "ready", "/metrics": `fettle_request_seconds_count{method="GET",route="/v1/me",status="200"} 1`} {
		resp, err := http.Get(h.url + path)
		if err != nil {
			t.Fatal(err)
		}
		buf := new(strings.Builder)
		if _, err := fmt.Fprint(buf, resp.Status, " "); err != nil {
			t.Fatal(err)
		}
		body := make([]byte, 1<<20)
		n := 0
		for {
			k, err := resp.Body.Read(body[n:])
			if n += k; err != nil {
				break
			}
		}
		resp.Body.Close()
		if resp.StatusCode != 200 || !strings.Contains(string(body[:n]), want) {
			t.Errorf("%s: %s, without %q", path, resp.Status, want)
		}
	}
}
