package outside

import (
	"context"
	"fmt"
	"regexp"
	"strings"
	"time"

	"google.golang.org/grpc/health/grpc_health_v1"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// pingEvery is how often an idle process is asked whether it is well.
const pingEvery = 2 * time.Second

var typeForm = regexp.MustCompile(`^[a-z][a-z0-9_]{0,63}$`)

// describe asks the process what it is, and refuses what a recipe could not use.
func (p *process) describe(ctx context.Context) (*stagepb.DescribeResponse, error) {
	ctx, cancel := context.WithTimeout(ctx, p.set.Deadline)
	defer cancel()
	d, err := p.stub.Describe(ctx, &stagepb.DescribeRequest{ContractVersions: []int32{ContractVersion}})
	if err != nil {
		return nil, p.withLog(fmt.Sprintf("it does not describe itself: %v", err))
	}
	switch {
	case d.GetContractVersion() != ContractVersion:
		return nil, fmt.Errorf("it speaks version %d of the stage contract, this program speaks %d", d.GetContractVersion(), ContractVersion)
	case !typeForm.MatchString(d.GetType()):
		return nil, fmt.Errorf("its type is %q, want a word of a-z, 0-9 and _", d.GetType())
	case d.GetVersion() == "" || len(d.GetVersion()) > 64:
		return nil, fmt.Errorf("its version is %q, want 1 to 64 characters", d.GetVersion())
	case d.GetScope() != stagepb.Scope_SCOPE_VIEW && d.GetScope() != stagepb.Scope_SCOPE_UNIT:
		return nil, fmt.Errorf("its scope is %v, want a view or a unit", d.GetScope())
	case len(d.GetWrites()) == 0:
		return nil, fmt.Errorf("it writes nothing; want the planes and properties that it makes")
	}
	return d, nil
}

// ping kills a process that does not answer its health check although no call is under
// way: it would not answer a call either.
func (p *process) ping() {
	if len(p.slots) < p.set.MaxConcurrent {
		return
	}
	ctx, cancel := context.WithTimeout(context.Background(), p.set.Deadline)
	defer cancel()
	if _, err := p.health.Check(ctx, &grpc_health_v1.HealthCheckRequest{Service: "plugin"}); err != nil {
		p.kill(fmt.Sprintf("its health check failed: %v; it was killed", err))
	}
}

// factoryOf returns the factory of a program, with settings of a type made for them.
func (h *Host) factoryOf(made *program) pipeline.Factory {
	d := made.described
	scope := pipeline.ScopeView
	if d.GetScope() == stagepb.Scope_SCOPE_UNIT {
		scope = pipeline.ScopeUnit
	}
	f := pipeline.Factory{Type: d.GetType(), Version: d.GetVersion(), Summary: d.GetSummary(), Scope: scope, Reads: d.GetReads(), Writes: d.GetWrites(),
		Stateful: d.GetStateful(), Defaults: made.settings.defaults()}
	f.Check = func(values any) error { _, err := h.effective(context.Background(), values); return err }
	f.New = func(decode pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
		return h.newStage(made, decode, env)
	}
	return f
}

// effective has the stage check settings and returns them as it will use them. While
// the stage restarts or is down, they are taken unchecked: it checks them when it opens.
func (h *Host) effective(ctx context.Context, values any) (string, error) {
	text, err := settingsText(values)
	if err != nil {
		return "", err
	}
	p, _, _ := h.now()
	if p == nil {
		return text, nil
	}
	ctx, cancel := context.WithTimeout(ctx, h.set.Deadline)
	defer cancel()
	res, err := p.stub.CheckSettings(ctx, &stagepb.CheckSettingsRequest{SettingsJson: text})
	if err != nil {
		return "", pipeline.Fail(pipeline.Unready, "stage %s cannot check its settings: %w", h.set.Name, err)
	}
	var wrong []string
	var problems []error
	for _, s := range res.GetProblems() {
		line := strings.TrimPrefix(s.GetKey()+": "+s.GetMessage(), ": ")
		wrong, problems = append(wrong, line), append(problems, fmt.Errorf("%s", line))
	}
	if len(problems) > 0 {
		return "", &settingsError{strings.Join(wrong, "\n"), problems}
	}
	return res.GetEffectiveSettingsJson(), nil
}

// settingsError is what is wrong with settings, each with its key before it.
type settingsError struct {
	text     string
	problems []error
}

func (e *settingsError) Error() string   { return e.text }
func (e *settingsError) Unwrap() []error { return e.problems }
