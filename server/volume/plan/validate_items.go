package plan

import (
	"fmt"
	"math"
	"slices"
	"time"

	"lapgate/server/volume/learning"
	"lapgate/server/volume/sampling"
)

func (p *Plan) checkProcess(c *checks, at string, x *Process) {
	for _, v := range []struct {
		key   string
		value float64
	}{
		{"tooling_cost", x.ToolingCost}, {"tooling_life_starts", x.ToolingLifeStarts}, {"repair_cost", x.RepairCost},
		{"repair_every_starts", x.RepairEveryStarts}, {"first_article_cost", x.FirstArticleCost}, {"setup_cost", x.SetupCost},
		{"batch_size", x.BatchSize}, {"block_size", x.BlockSize}, {"lead_time_days", x.LeadTimeDays},
		{"usual_quantity.from", x.UsualQuantity.From}, {"usual_quantity.to", x.UsualQuantity.To},
	} {
		c.notNegative(at+"."+v.key, v.value)
	}
	c.want(x.BlockSize == math.Trunc(x.BlockSize), at+".block_size", "found %v; allowed: a whole number", x.BlockSize)
	c.priceBreaks(at+".cost_per_start", x.CostPerStart)
	if x.Learning != nil {
		c.learning(at+".learning", x.Learning)
	}
	p.checkYield(c, at+".yield", &x.Yield)
}

func (c *checks) priceBreaks(at string, breaks []PriceBreak) {
	if !c.want(len(breaks) > 0, at, "is empty; at least one price is needed") {
		return
	}
	c.want(breaks[0].FromStarts <= 1, at+"[0].from_starts", "found %v; the first price must hold from 1 start", breaks[0].FromStarts)
	for i, b := range breaks {
		c.notNegative(fmt.Sprintf("%s[%d].cost", at, i), b.Cost)
		c.notNegative(fmt.Sprintf("%s[%d].from_starts", at, i), b.FromStarts)
		c.want(i == 0 || b.FromStarts > breaks[i-1].FromStarts, fmt.Sprintf("%s[%d].from_starts", at, i),
			"found %v; the starts must rise from price to price", b.FromStarts)
	}
}

func (c *checks) learning(at string, l *Learning) {
	known := l.Convention == string(learning.Crawford) || l.Convention == string(learning.Wright)
	c.want(known, at+".convention", "found %q; allowed: %s, %s", l.Convention, learning.Crawford, learning.Wright)
	c.want(l.Rate >= 0.5 && l.Rate <= 1, at+".rate", "found %v; allowed: 0.5 to 1 (0.8 for an 80 %% curve)", l.Rate)
	c.share(at+".share", l.Share)
	c.want(l.PricedAt == 0 || l.PricedAt >= 1, at+".priced_at", "found %v; allowed: 1 or more", l.PricedAt)
}

func (p *Plan) checkYield(c *checks, at string, y *Yield) {
	if y.Ledger == nil {
		c.knowledge(at, Share{y.Value, y.Count, y.Beta})
		c.want(y.Value == nil || *y.Value != 0, at+".value", "found 0; no unit would ever ship")
		c.want(y.Count == nil || y.Count.K != 0, at+".count", "found no conforming unit; no unit would ever ship")
		return
	}
	c.want(y.Value == nil && y.Count == nil && y.Beta == nil, at, "says ledger and another yield; exactly one is needed")
	f := y.Ledger
	i := p.InspectionIndex(f.Gate)
	if c.want(i >= 0, at+".ledger.gate", "found %q; name the inspection option whose verdicts the ledger holds", f.Gate) {
		c.want(p.Inspections[i].Kind != None, at+".ledger.gate", "%q inspects nothing and gives no verdicts", f.Gate)
	}
	for key, text := range map[string]string{"from": f.From, "to": f.To} {
		_, err := time.Parse(time.RFC3339, text)
		c.want(text == "" || err == nil, at+".ledger."+key, "found %q; allowed: a time such as 2031-05-01T06:15:00Z", text)
	}
}

func (p *Plan) checkInspection(c *checks, at string, x *Inspection) {
	if !c.want(slices.Contains(Kinds(), x.Kind), at+".kind", "found %q; allowed: %v", x.Kind, Kinds()) {
		return
	}
	c.want((x.ISO2859 != nil) == (x.Kind == ISO2859), at+".iso_2859_1", "goes with kind %s, and only with it", ISO2859)
	c.want((x.CSP1 != nil) == (x.Kind == CSP), at+".csp_1", "goes with kind %s, and only with it", CSP)
	if x.Kind == None {
		c.want(x.Study == nil && x.FalseReject == (Share{}) && x.Miss == (Share{}), at, "kind none has no misses and false rejects")
		return
	}
	c.lots(at+".iso_2859_1", x.ISO2859)
	c.stream(at+".csp_1", x.CSP1)
	if x.SameErrorsAs == "" {
		c.errorRates(at, x)
	} else {
		p.checkSameErrors(c, at, x)
	}
	c.twice(at, x)
	c.station(at+".station", &x.Station)
	c.share(at+".hold.share", x.Hold.Share)
	c.notNegative(at+".hold.cost", x.Hold.Cost)
	c.notNegative(at+".hold.minutes", x.Hold.Minutes)
	p.checkRoute(c, at+".rework", x.Rework)
}

func (c *checks) lots(at string, l *Lots) {
	if l == nil {
		return
	}
	c.want(slices.Contains(sampling.Levels(), l.Level), at+".level", "found %q; allowed: %v", l.Level, sampling.Levels())
	c.want(slices.Contains(sampling.AQLs(), l.AQLPercent), at+".aql_percent", "found %v; allowed: %v", l.AQLPercent, sampling.AQLs())
	c.want(l.LotSize >= 2, at+".lot_size", "found %d; allowed: 2 or more", l.LotSize)
	c.want(l.RejectedLots == ScreenLot || l.RejectedLots == ScrapLot, at+".rejected_lots",
		"found %q; allowed: %s, %s", l.RejectedLots, ScreenLot, ScrapLot)
}

func (c *checks) stream(at string, s *Stream) {
	if s == nil {
		return
	}
	c.want(s.Clearance >= 1, at+".clearance", "found %d; allowed: 1 or more", s.Clearance)
	c.positiveShare(at+".fraction", s.Fraction)
}

// checkSameErrors wants an option that says its shares itself.
func (p *Plan) checkSameErrors(c *checks, at string, x *Inspection) {
	i := p.InspectionIndex(x.SameErrorsAs)
	ok := i >= 0 && p.Inspections[i].Kind != None && p.Inspections[i].SameErrorsAs == ""
	c.want(ok, at+".same_errors_as", "found %q; name an inspection option that states its own misses and false rejects", x.SameErrorsAs)
	c.want(x.Study == nil && x.FalseReject == (Share{}) && x.Miss == (Share{}), at+".same_errors_as",
		"says shares or a study besides; exactly one is needed")
}

func (c *checks) errorRates(at string, x *Inspection) {
	if x.Study == nil {
		c.knowledge(at+".false_reject", x.FalseReject)
		c.knowledge(at+".miss", x.Miss)
		return
	}
	c.want(x.FalseReject == (Share{}) && x.Miss == (Share{}), at+".study", "says study and shares; exactly one is needed")
	sum := 0.0
	for i, size := range x.Study.DefectSizes {
		c.share(fmt.Sprintf("%s.study.defect_sizes[%d].share", at, i), size.Share)
		sum += size.Share
	}
	c.want(math.Abs(sum-1) < 1e-6, at+".study.defect_sizes", "the shares add up to %v; they must add up to 1", sum)
}

func (c *checks) twice(at string, x *Inspection) {
	if x.Kind != TwiceMajority && x.Kind != TwiceEither {
		c.want(x.SameResultShare == nil, at+".same_result_share", "goes with kinds %s and %s only", TwiceMajority, TwiceEither)
		return
	}
	if c.want(x.SameResultShare != nil, at+".same_result_share",
		"is missing; say how often a second look repeats the first (0: independent, 1: always)") {
		c.share(at+".same_result_share", *x.SameResultShare)
	}
}

func (c *checks) station(at string, s *Station) {
	c.notNegative(at+".price", s.Price)
	c.want(s.LifeYears > 0 || (s.LifeYears == 0 && s.Price == 0), at+".life_years", "found %v; allowed: above 0", s.LifeYears)
	c.notNegative(at+".cycle_time_s", s.CycleTimeS)
	c.notNegative(at+".crew", s.Crew)
	c.share(at+".uptime", s.Uptime)
	c.notNegative(at+".running_cost_per_hour", s.RunningCostPerHour)
	c.notNegative(at+".cost_per_look", s.CostPerLook)
	c.notNegative(at+".max_wait_s", s.MaxWaitS)
	c.want(s.Charge == "" || s.Charge == ByUse || s.Charge == Dedicated, at+".charge",
		"found %q; allowed: %s, %s", s.Charge, ByUse, Dedicated)
}
