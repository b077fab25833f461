package identify

import (
	"encoding/json"
	"testing"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

func TestMotorGenerator(t *testing.T) {
	tr, err := trace.ReadFile("../../testdata/traces/motor_generator.csv")
	if err != nil {
		t.Fatal(err)
	}
	for _, kind := range []string{model.KindFirstOrder, model.KindSecondOrder} {
		for _, h := range []float64{0, 0.5} {
			res, err := Run(tr, Options{Kind: kind, Holdout: h})
			if err != nil {
				t.Fatal(err)
			}
			b, _ := json.MarshalIndent(res, "", " ")
			t.Log(string(b))
		}
	}
}
