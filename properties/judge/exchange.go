package judge

import (
	"encoding/json"

	"pathtally/properties"
)

// exchanged is the form in which the result of a rule travels from the machine
// that judged it to the one that puts a run together.
type exchanged struct {
	Findings    []Finding
	Open        []Open
	Questions   []Question
	Assumptions []properties.Note
	Instances   int
	Roots       []string
	Cut         []string
}

// MarshalJSON writes all that Merge needs.
func (r *RuleResult) MarshalJSON() ([]byte, error) {
	return json.Marshal(exchanged{r.findings, r.open, r.questions, r.assumptions, r.instances, r.roots, r.cut})
}

// UnmarshalJSON reads what MarshalJSON wrote; Merge gives the same for it.
func (r *RuleResult) UnmarshalJSON(data []byte) error {
	var x exchanged
	if err := json.Unmarshal(data, &x); err != nil {
		return err
	}
	*r = RuleResult{findings: x.Findings, open: x.Open, questions: x.Questions, assumptions: x.Assumptions, instances: x.Instances, roots: x.Roots, cut: x.Cut}
	return nil
}
