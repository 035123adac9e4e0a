package datasets_test

import (
	"fmt"

	"ulpine/datasets"
)

// A source is made from the keys of a plan's task; the seed is the replicate's.
func ExampleNew() {
	source, err := datasets.New("pump-vibration", datasets.Options{Values: map[string]any{
		"train": int64(100), "validation": int64(0), "test": int64(50), "variant": "remounted",
	}})
	if err != nil {
		fmt.Println(err)
		return
	}
	data, err := source.Load(100)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(source.Canonical())
	fmt.Println(data.Train.Inputs.Shape(), data.ClassNames[data.Train.Labels[3]])
	_, err = datasets.New("pump-vibration", datasets.Options{Values: map[string]any{"train": int64(0)}})
	fmt.Println(err)
	// Output:
	// pump-vibration train=100 validation=0 test=50 data_seed=1 variant=remounted scale=standardise
	// (100, 1, 128) bearing
	// train: 0 is out of range; choose 1 to 10000000
}
