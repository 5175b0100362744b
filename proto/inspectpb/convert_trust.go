package inspectpb

// Words for what an approval takes effect from, what a master's showing proved, and how
// a station stands.
const (
	WordNow     = "now"
	WordNextLot = "next_lot"
	WordPass    = "pass"
	WordFail    = "fail"
	WordVoid    = "void"
	WordOK      = "ok"
	WordHolding = "holding"
)

func effectives() []enum[string, Effective] {
	return []enum[string, Effective]{{WordNow, Effective_EFFECTIVE_NOW}, {WordNextLot, Effective_EFFECTIVE_NEXT_LOT}}
}

func checkResults() []enum[string, CheckResult] {
	return []enum[string, CheckResult]{{WordPass, CheckResult_CHECK_RESULT_PASS}, {WordFail, CheckResult_CHECK_RESULT_FAIL}, {WordVoid, CheckResult_CHECK_RESULT_VOID}}
}

func stationStates() []enum[string, StationState] {
	return []enum[string, StationState]{{WordOK, StationState_STATION_STATE_OK}, {WordHolding, StationState_STATION_STATE_HOLDING}}
}

// FromEffective returns the wire's number, EFFECTIVE_UNSPECIFIED for an unknown word.
func FromEffective(word string) Effective { return numberOf(effectives(), word) }

// ToEffective refuses an unspecified or unknown effect.
func ToEffective(e Effective) (string, error) { return wordOf("effective", effectives(), e) }

// FromCheckResult returns the wire's number, CHECK_RESULT_UNSPECIFIED for an unknown word.
func FromCheckResult(word string) CheckResult { return numberOf(checkResults(), word) }

// ToCheckResult refuses an unspecified or unknown result.
func ToCheckResult(r CheckResult) (string, error) { return wordOf("result", checkResults(), r) }

// FromStationState returns the wire's number, STATION_STATE_UNSPECIFIED for an unknown word.
func FromStationState(word string) StationState { return numberOf(stationStates(), word) }

// ToStationState refuses an unspecified or unknown state.
func ToStationState(s StationState) (string, error) { return wordOf("state", stationStates(), s) }
