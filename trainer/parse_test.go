package trainer

import (
	"fmt"
	"strings"
	"testing"
)

func TestLayersAreSpeltOut(t *testing.T) {
	net := network(t, []int{1, 128}, "conv1d out=6 width=9 stride=2", "relu", "maxpool size=2", " dense  16 ", "relu", "dense 5")
	want := []string{
		"conv1d out=6 width=9 stride=2 pad=0 6x60", "relu 6x60", "maxpool size=2 stride=2 6x30", "dense 16 16", "relu 16", "dense 5 5",
	}
	for i, l := range net.Layers {
		if got := l.Name + " " + shapeText(l.Out); got != want[i] {
			t.Errorf("layer %d is %q, want %q", i, got, want[i])
		}
	}
	if got := net.Parameters(); got != 6*9+6+16*180+16+5*16+5 {
		t.Errorf("%d parameters", got)
	}
	net = network(t, []int{3, 8, 9}, "conv2d out=2 size=3x5 stride=2x1 pad=1", "avgpool size=2x3", "flatten")
	if got := net.Layers[0].Name + " " + shapeText(net.Layers[0].Out); got != "conv2d out=2 size=3x5 stride=2x1 pad=1 2x4x7" {
		t.Error(got)
	}
	if got := net.Layers[1].Name + " " + shapeText(net.Layers[1].Out); got != "avgpool size=2x3 stride=2x3 2x2x2" {
		t.Error(got)
	}
	net2 := network(t, []int{4, 30, 30}, "conv2d out=4 size=3 dilation=2x1 groups=4", "leakyrelu", "dropout 0.25", "gelu", "globalavgpool")
	for i, want := range []string{"conv2d out=4 size=3 stride=1 pad=0 dilation=2x1 groups=4 4x26x28", "leakyrelu slope=0.01 4x26x28", "dropout 0.25 4x26x28", "gelu 4x26x28", "globalavgpool 4"} {
		if got := net2.Layers[i].Name + " " + shapeText(net2.Layers[i].Out); got != want {
			t.Errorf("layer %d is %q, want %q", i, got, want)
		}
		if again, err := parseLayer(net2.Layers[i].Name, net2.Layers[i].In); err != nil || again.Name != net2.Layers[i].Name {
			t.Errorf("%q read again: %v", net2.Layers[i].Name, err)
		}
	}
	again := network(t, net.Input, net.Layers[0].Name, net.Layers[1].Name, net.Layers[2].Name)
	if fmt.Sprint(again.Layers[1].Out, again.Outputs()) != fmt.Sprint(net.Layers[1].Out, 8) {
		t.Error("a name spelt out does not parse to the same layer")
	}
}

func TestParseErrorsNameLayerAndRemedy(t *testing.T) {
	image, signal := []int{1, 28, 28}, []int{2, 10}
	cases := []struct {
		input  []int
		layers []string
		want   []string
	}{
		{signal, nil, []string{"no layers", "dense CLASSES"}},
		{[]int{0}, []string{"dense 2"}, []string{"input shape 0", "at least 1"}},
		{[]int{}, []string{"dense 2"}, []string{"input shape no dimension"}},
		{signal, []string{"dense 3", ""}, []string{"layer 2 of 2", "empty text", "conv1d"}},
		{signal, []string{"desne 3"}, []string{`layer 1 of 1, "desne 3" on an input of 2x10`, `unknown layer "desne"`, `did you mean "dense"?`}},
		{signal, []string{"xyzzy"}, []string{`unknown layer "xyzzy"; known: dense, conv1d`}},
		{signal, []string{"dense"}, []string{"number of units is missing", `write "dense 16"`}},
		{signal, []string{"dense ten"}, []string{`units is "ten", not a whole number`}},
		{signal, []string{"dense 0"}, []string{"units is 0; it must be at least 1"}},
		{signal, []string{"dense 3 4"}, []string{`"4" is not understood`}},
		{signal, []string{"dense 3 bias=no"}, []string{"dense takes no option bias"}},
		{signal, []string{"relu 3"}, []string{`"3" is not understood; write "relu"`}},
		{signal, []string{"conv1d width=3"}, []string{"out is missing", "conv1d out=6 width=9"}},
		{signal, []string{"conv1d out=2 width=3 strid=2"}, []string{`unknown option "strid"`, `did you mean "stride"?`}},
		{signal, []string{"conv1d out=2 out=3 width=3"}, []string{"out is given twice"}},
		{signal, []string{"conv1d out= width=3"}, []string{`"out=" is no option`, "key=value"}},
		{signal, []string{"conv1d out=2 width=11"}, []string{"output length (10 + 2*0 - 11)/1 + 1 is below 1", "reaches over at most 10 or pad=1"}},
		{signal, []string{"conv1d out=2 width=3 pad=3"}, []string{"pad=3 is not smaller than the kernel's 3", "use pad=2 or less"}},
		{signal, []string{"conv1d out=2 width=3 stride=0"}, []string{"stride is 0; it must be at least 1"}},
		{signal, []string{"conv2d out=2 size=3"}, []string{"conv2d needs an input of channels x rows x columns", "use conv1d"}},
		{image, []string{"conv1d out=2 width=3"}, []string{"conv1d needs an input of channels x length", "1x784"}},
		{[]int{128}, []string{"maxpool size=2"}, []string{"maxpool needs an input of channels x rows x columns or of channels x length"}},
		{image, []string{"conv2d out=2 size=5", "maxpool size=30"}, []string{"layer 2 of 2", "on an input of 2x24x24", "(24 + 2*0 - 30)/30 + 1"}},
		{image, []string{"maxpool size=2 pad=1"}, []string{`unknown option "pad"`, "known: size, stride"}},
		{signal, []string{"conv1d out=2 width=3 groups=3"}, []string{"groups=3 does not divide 2 input channels and 2 output channels"}},
		{signal, []string{"conv1d out=3 width=3 groups=2"}, []string{"groups=2 does not divide", "common divisor"}},
		{signal, []string{"conv1d out=2 width=3 dilation=5"}, []string{"(10 + 2*0 - 11)/1 + 1 is below 1"}},
		{signal, []string{"conv1d out=2 width=3 dilation=0"}, []string{"dilation is 0; it must be at least 1"}},
		{signal, []string{"dropout"}, []string{"probability of dropping is missing", `write "dropout 0.5"`}},
		{signal, []string{"dropout 1"}, []string{"is 1; it must lie between 0 and 1"}},
		{signal, []string{"dropout half"}, []string{`is "half", not a number`}},
		{signal, []string{"leakyrelu slope=2"}, []string{"slope is 2; it must lie between 0 and 1"}},
		{signal, []string{"leakyrelu slope=NaN"}, []string{`"NaN", not a number`}},
		{[]int{5}, []string{"globalavgpool"}, []string{"globalavgpool needs an input of channels x rows x columns or of channels x length"}},
		{signal, []string{"residual"}, []string{"one of two words", `"residual begin"`}},
		{signal, []string{"residual end", "dense 2"}, []string{"layer 1", "without a begin"}},
		{signal, []string{"residual begin", "dense 2"}, []string{"layer 1", "without an end"}},
		{signal, []string{"residual begin", "dense 2", "residual end"}, []string{"layer 3", "adds 2x10, begun at layer 1, to 2"}},
		{[]int{1}, []string{"layernorm"}, []string{"would always give 0"}},
		{signal, []string{"layernorm epsilon=0"}, []string{"epsilon is 0"}},
		{signal, []string{"batchnorm momentum=2"}, []string{"momentum is 2"}},
		{[]int{5}, []string{"attention"}, []string{"attention needs an input of channels x length", "1x5"}},
		{signal, []string{"attention heads=3 width=8"}, []string{"heads=3 does not divide a width of 8", "use a divisor"}},
		{signal, []string{"attention mask=casual"}, []string{`unknown mask "casual"; did you mean "causal"?`}},
		{signal, []string{"attention width=99999999"}, []string{"at 10 positions are more than", "use strides or pools below"}},
		{[]int{1, 100000}, []string{"attention"}, []string{"at 100000 positions are more than"}},
		{image, []string{"recurrent units=3"}, []string{"recurrent needs an input of channels x length"}},
		{signal, []string{"recurrent"}, []string{"units is missing", "recurrent units=16"}},
		{signal, []string{"recurrent units=3 cell=lstm"}, []string{`unknown cell "lstm"`, "elman, gru"}},
		{signal, []string{"recurrent units=3 output=first"}, []string{`unknown output "first"`, "last, all"}},
		{signal, []string{"recurrent units=99999999"}, []string{"at 10 times are more than", "use fewer units"}},
		{image, []string{"dense 99999999"}, []string{"weight of 99999999x784", "more than"}},
	}
	for _, c := range cases {
		_, err := ParseLayers(c.layers, c.input)
		if err == nil {
			t.Errorf("%q on %v is accepted", c.layers, c.input)
			continue
		}
		for _, part := range c.want {
			if !strings.Contains(err.Error(), part) {
				t.Errorf("%q: error %q lacks %q", c.layers, err, part)
			}
		}
	}
}

// TestDescribe checks lengths and work against reckoning by hand.
func TestDescribe(t *testing.T) {
	net := network(t, []int{1, 28, 28}, "conv2d out=8 size=5", "relu", "maxpool size=2", "conv2d out=16 size=5", "relu", "avgpool size=3 stride=2", "dense 10")
	arm := baseline(t, len(net.Layers))
	training := sgdTraining(64, 3)
	training.EvaluateValidation = EveryEpoch
	d := Describe(net, &arm, training, Sizes{Train: 1000, Validation: 100, Test: 200})
	lengths := []Lengths{
		{25, 0, 64 * 576, 64 * 576},
		{},
		{},
		{200, 400, 64 * 64, 64 * 64},
		{},
		{9, 4, 0, 0},
		{144, 10, 64, 64},
	}
	for i, want := range lengths {
		if got := d.Layers[i].Sums; got != want {
			t.Errorf("layer %d (%s): sums of %+v terms, want %+v", i, d.Layers[i].Name, got, want)
		}
	}
	c1, c2, pool, dense := 8*25*576, 16*200*64, 9*16*9, 10*144
	forward := c1 + c2 + pool + dense
	back := c1 + c2 + dense + 8*400*144 + 4*16*64 + dense
	if got := d.StepMACs; got != uint64(64*(forward+back)) {
		t.Errorf("%d multiply-adds a step, want %d", got, 64*(forward+back))
	}
	if got, want := d.TotalMACs, uint64(3*1000*(forward+back)+(3*100+200)*forward); got != want {
		t.Errorf("%d multiply-adds, want %d", got, want)
	}
	if d.LongestSum != 64*576 || d.Steps != 48 || d.Parameters != 8*26+16*201+10*145 || d.Double || d.Wide {
		t.Errorf("%+v", d)
	}
	for _, id := range d.Layers[0].Points {
		if id.inputGradient() {
			t.Errorf("the first layer lists %s", id)
		}
	}
	if got := fmt.Sprint(d.Layers[5].Points); !strings.Contains(got, "input_gradient.sum") || !strings.Contains(got, "forward.sum") {
		t.Errorf("an overlapping average pool has the points %s", got)
	}
}

func TestPointsHaveNames(t *testing.T) {
	seen := map[string]bool{}
	for _, name := range PointNames() {
		if name == "" || seen[name] {
			t.Errorf("point called %q twice or not at all", name)
		}
		seen[name] = true
	}
	if len(seen) != 27 || PointID(99).String() != "unknown point" {
		t.Errorf("%d points", len(seen))
	}
}

// TestOperationsHaveNumbersOfTheirOwn: two operations of one layer must never
// share random words.
func TestOperationsHaveNumbersOfTheirOwn(t *testing.T) {
	numbers := []operation{
		opInput, opLossGradient, opActivation, opForwardProduct, opForwardProduct + 1, opForwardSum, opForwardSum + 1,
		opInputOperand, opInputProduct, opInputProduct + 1, opInputSum, opInputSum + 1, opInputResult,
		opActivationAgain, opWeightOperand, opForwardOperand,
		opMeanSum, opMeanSum + 1, opMean, opDeviation, opSquare, opSquare + 1, opSquareSum, opSquareSum + 1, opVariance,
		opInverse, opNormal, opUnbiased, opFollowMean, opFollowMean + 1, opFollowMean + 2, opFollowVariance,
		opFollowVariance + 1, opFollowVariance + 2, opBackSum, opBackSum + 1, opBackMean, opCentre, opDot, opDot + 1,
		opDotSum, opDotSum + 1, opBackDot, opShare, opRest, opNormalResult,
	}
	for q := range 2 {
		for _, o := range []operation{opWorking, opWeightAgain, opWeightProduct, opWeightProduct + 1, opWeightSum, opWeightSum + 1, opWeightResult, opStep, opMaster, opAhead, opAheadSum, opRoot, opRootSum, opRatio, opDecay, opDecaySum, opResidue, opResidueScale} {
			numbers = append(numbers, o.of(q))
		}
		for s := range 4 {
			for n := range 4 {
				numbers = append(numbers, opStateNumber(s, n).of(q))
			}
		}
	}
	seen := map[operation]bool{}
	for _, o := range numbers {
		if seen[o] || o > 255 {
			t.Errorf("operation number %d is taken twice or leaves its byte", o)
		}
		seen[o] = true
	}
}
