package trainer

import "fmt"

// globalAvgPoolKind is an average pool whose window is the whole plane (or
// length): one mean a channel, rounded as avgPoolKind says. Its output has one
// dimension, the channels.
var globalAvgPoolKind = kind{
	name: "globalavgpool", usage: "globalavgpool", parse: parseGlobalAvgPool,
	build32: newAvgPool[float32], build64: newAvgPool[float64],
}

func parseGlobalAvgPool(_ *options, s *Spec) error {
	if len(s.In) != 2 && len(s.In) != 3 {
		return fmt.Errorf("globalavgpool needs an input of channels x rows x columns%s", poolShapes("globalavgpool"))
	}
	g := window{c: s.In[0], h: 1, w: s.In[len(s.In)-1], oh: 1, ow: 1}
	if len(s.In) == 3 {
		g.h = s.In[1]
	}
	g.kh, g.kw, g.sh, g.sw = g.h, g.w, g.h, g.w
	s.Name, s.Out, s.window = "globalavgpool", []int{g.c}, g
	s.Points = append(append([]PointID{}, forwardSums...), ForwardActivation, InputGradientResult)
	s.Sums.Forward = g.size()
	s.MACs.Forward = uint64(g.size()) * uint64(g.c)
	return nil
}
