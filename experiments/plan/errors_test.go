package plan

import (
	"strings"
	"testing"
	"unicode/utf8"
)

// mark stands on the line that an error must name.
const mark = "# <-"

// markedLine is the line of the mark, 0 without one.
func markedLine(text string) int {
	before, _, found := strings.Cut(text, mark)
	if !found {
		return 0
	}
	return 1 + strings.Count(before, "\n")
}

// Each case replaces one part of basePlan and expects exactly one error.
func TestErrorsNameLineKeyReasonRemedy(t *testing.T) {
	for name, c := range map[string]struct{ old, new, key, reason, remedy string }{
		"unknown table":            {"[claim]", "[clam] # <-\nx = 1\n[claim]", "clam", "unknown key", `did you mean "claim"?`},
		"unknown key":              {"epochs = 3", "epochs = 3\nepohcs = 4 # <-", "training.epohcs", "unknown key", `did you mean "epochs"?`},
		"unknown key far":          {"epochs = 3", "epochs = 3\nzzz = 4 # <-", "training.zzz", "unknown key", "write one of augment, batch, diagnostics, epochs"},
		"unknown predictions":      {"epochs = 3", "epochs = 3\npredictions = \"store\" # <-", "training.predictions", `unknown word "store"`, `did you mean "stored"?`},
		"unknown arm key":          {`storage = "bf16"`, `acumulate = "bf16" # <-`, "arm[1].acumulate", "unknown key", `did you mean "accumulate"?`},
		"bare point":               {`storage = "bf16"`, `master = "bf16" # <-`, "arm[1].master", "unknown key", "write the point in full: update.master"},
		"unknown point":            {`storage = "bf16"`, `forward.activations = "bf16" # <-`, "arm[1].forward.activations", "unknown key", `did you mean "activation"?`},
		"point of another phase":   {`storage = "bf16"`, `forward.result = "bf16" # <-`, "arm[1].forward.result", "unknown key", "write one of activation, moment, operand, outer, product, statistic, sum, weight"},
		"phase is no point":        {`storage = "bf16"`, `forward = "bf16" # <-`, "arm[1].forward", `wrong type: "bf16" is a text, want a table of points`, "forward.activation = ..."},
		"unknown setting key":      {`storage = "bf16"`, `storage = { format = "bf16", roundng = "up" } # <-`, "arm[1].storage.roundng", "unknown key", `did you mean "rounding"?`},
		"unknown format":           {`storage = "bf16"`, `storage = "bf61" # <-`, "arm[1].storage", `unknown format "bf61"`, `did you mean "bf16"?`},
		"unknown format far":       {`storage = "bf16"`, `storage = "decimal7" # <-`, "arm[1].storage", `unknown format "decimal7"`, "or EeMm for another split (E6M9)"},
		"unknown format in table":  {`storage = "bf16"`, "storage = {\n format = \"fp61\", # <-\n}", "arm[1].storage.format", `unknown format "fp61"`, `did you mean "fp16"?`},
		"impossible split":         {`storage = "bf16"`, `storage = "E12M9" # <-`, "arm[1].storage", "12 exponent bits", ""},
		"format missing":           {`storage = "bf16"`, `storage = { rounding = "up" } # <-`, "arm[1].storage", "format is missing", `write format = "bf16"`},
		"setting of wrong type":    {`storage = "bf16"`, `storage = 16 # <-`, "arm[1].storage", "wrong type: 16 is a whole number, want a format or a table", `storage = "bf16"`},
		"width":                    {`storage = "bf16"`, `storage = { format = "E6M9", width = 15 } # <-`, "arm[1].storage.width", "E6M9 has 1 + 6 + 9 = 16 bits, not 15", "write width = 16"},
		"width of own format":      {"[claim]", "[format.mine]\nexponent = 4\nfraction = 2\nwidth = 8 # <-\n[claim]", "format.mine.width", "E4M2 has 1 + 4 + 2 = 7 bits, not 8", "write width = 7"},
		"own format unsplit":       {"[claim]", "[format.mine] # <-\nexponent = 4\n[claim]", "format.mine", "fraction is missing", "write fraction = 4"},
		"own format top":           {"[claim]", "[format.mine]\nexponent = 4\nfraction = 3\ntop = \"iee\" # <-\n[claim]", "format.mine.top", `unknown word "iee"`, `did you mean "ieee"?`},
		"own format known":         {"[claim]", "[format.E4M3] # <-\nexponent = 4\nfraction = 3\n[claim]", "format.E4M3", "names a known format already", "choose another name"},
		"own format of nothing":    {"[claim]", "[format.mine] # <-\nexponent = 0\nfraction = 0\n[claim]", "format.mine", "at least one bit", ""},
		"random bits alone":        {`storage = "bf16"`, `update.master = { format = "bf16", random_bits = 8 } # <-`, "arm[1].update.master.random_bits", "random_bits without stochastic rounding", `write rounding = "stochastic"`},
		"variant alone":            {`storage = "bf16"`, `update.master = { format = "bf16", variant = "centred" } # <-`, "arm[1].update.master.variant", "variant without stochastic rounding", `write rounding = "stochastic"`},
		"random bits in sums":      {`storage = "bf16"`, `forward.sum = { format = "bf16", rounding = "stochastic", random_bits = 17 } # <-`, "arm[1].forward.sum.random_bits", "17 random bits: inside sums at most 16", "write 1 to 16"},
		"random bits in products":  {`storage = "bf16"`, `forward.product = { format = "bf16", rounding = "stochastic", random_bits = 17 } # <-`, "arm[1].forward.product.random_bits", "17 random bits", "write 1 to 16"},
		"random bits everywhere":   {`storage = "bf16"`, `everything = { format = "bf16", rounding = "stochastic", random_bits = 17 } # <-`, "arm[1].everything.random_bits", "17 random bits", "write 1 to 16"},
		"too many random bits":     {`storage = "bf16"`, `storage = { format = "bf16", rounding = "stochastic", random_bits = 33 } # <-`, "arm[1].storage.random_bits", "33 is out of range", "write 1 to 32"},
		"no random bits":           {`storage = "bf16"`, `storage = { format = "bf16", rounding = "stochastic", random_bits = 0 } # <-`, "arm[1].storage.random_bits", "0 is out of range", "write 1 to 32"},
		"unknown rounding":         {`storage = "bf16"`, `storage = { format = "bf16", rounding = "nearest" } # <-`, "arm[1].storage.rounding", `unknown word "nearest"`, "nearest-"},
		"overflow without it":      {`storage = "bf16"`, `storage = { format = "E4M3", overflow = "infinity" } # <-`, "arm[1].storage.overflow", "the format has no infinity", "use saturate or nan"},
		"floats do not wrap":       {`storage = "bf16"`, `storage = { format = "bf16", overflow = "wrap" } # <-`, "arm[1].storage.overflow", "only integers and fixed point wrap", "use infinity, saturate or nan"},
		"order of no sum":          {`storage = "bf16"`, `storage = { format = "bf16", order = "wide" } # <-`, "arm[1].storage.order", "order belongs to a sum", "write it in accumulate"},
		"unknown order":            {`storage = "bf16"`, `accumulate = { format = "bf16", order = "chnk(64)" } # <-`, "arm[1].accumulate.order", `unknown order "chnk(64)"`, `did you mean "chunk"?`},
		"chunk of nothing":         {`storage = "bf16"`, `accumulate = { format = "bf16", order = "chunk(0)" } # <-`, "arm[1].accumulate.order", "needs a whole number of at least 1", "chunk(64)"},
		"chunk without length":     {`storage = "bf16"`, `accumulate = { format = "bf16", order = "chunk" } # <-`, "arm[1].accumulate.order", "needs a whole number", "chunk(64)"},
		"through what":             {`storage = "bf16"`, `accumulate = { format = "bf16", through = "bf16" } # <-`, "arm[1].accumulate.through", "no adder that is modelled", `write through = "binary32"`},
		"through wide":             {`storage = "bf16"`, `accumulate = { format = "bf16", order = "wide", through = "binary32" } # <-`, "arm[1].accumulate.through", "no adder to pass through", "leave through out"},
		"accumulate a product":     {`storage = "bf16"`, `accumulate = { format = "bf16", product = "exact" } # <-`, "arm[1].accumulate.product", "a product is a point of its own", "forward.product"},
		"exact is for products":    {`storage = "bf16"`, `forward.sum = "exact" # <-`, "arm[1].forward.sum", "only a product can be exact", "write a format"},
		"everything exact":         {`storage = "bf16"`, `everything = "exact" # <-`, "arm[1].everything", "only a product can be exact", "write a format"},
		"outer random bits":        {`storage = "bf16"`, `accumulate = { format = "bf16", outer = { format = "bf16", rounding = "stochastic", random_bits = 20 } } # <-`, "arm[1].accumulate.outer.random_bits", "20 random bits", "write 1 to 16"},
		"operand and weight":       {`storage = "bf16"`, "input_gradient.operand = \"fp16\"\ninput_gradient.weight = \"bf16\" # <-", "arm[1].input_gradient.weight", "sets input_gradient.weight, as input_gradient.operand in plan.toml line 24 does: two equally specific", "keep one of them"},
		"two outers":               {`storage = "bf16"`, "forward.outer = \"fp32\"\nforward.sum = { format = \"bf16\", outer = \"bf16\" } # <-", "arm[1].forward.sum.outer", "sets forward.outer, as forward.outer in plan.toml line 24 does", "keep one of them"},
		"layers missing":           {`layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]`, "", "network", "layers are missing", "write layers ="},
		"no layers":                {`layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]`, "layers = [] # <-", "network.layers", "the network has no layers", `write at least ["dense 5"]`},
		"last layer missing":       {`"relu", "dense 5"]`, "\n\"relu\" # <-\n]", "network.layers[2]", `the last layer, "relu", has an output of 4 x 16 = 64 values, but the task has 5 classes`, `end with "dense 5"`},
		"nothing to train":         {`layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]`, `layers = ["relu"] # <-`, "network.layers[1]", "nothing to train", `end with "dense 5"`},
		"unknown layer":            {`"relu", "dense 5"]`, "\n\"relo\", # <-\n\"dense 5\"]", "network.layers[2]", `unknown layer "relo"`, `did you mean "relu"?`},
		"shapes do not fit":        {`"relu", "dense 5"]`, "\n\"conv1d out=3 width=17\", # <-\n\"dense 5\"]", "network.layers[2]", "4x16", ""},
		"layers of wrong type":     {`layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]`, `layers = "dense 5" # <-`, "network.layers", "want an array of texts", "layers = ["},
		"layer of wrong type":      {`"relu", "dense 5"]`, "\n5, # <-\n\"dense 5\"]", "network.layers[2]", "5 is a whole number, want a text", ""},
		"margin zero":              {"margin = 0.01", "margin = 0 # <-", "claim.margin", "a margin of 0 is not positive", "write a positive margin"},
		"margin negative":          {"margin = 0.01", "margin = -0.5 # <-", "claim.margin", "a margin of -0.5 is not positive", "write a positive margin"},
		"margin nan":               {"margin = 0.01", "margin = nan # <-", "claim.margin", "NaN is not a finite number", "write a finite number"},
		"margin text":              {"margin = 0.01", `margin = "small" # <-`, "claim.margin", `"small" is a text, want a number`, "margin ="},
		"margin missing":           {"margin = 0.01", "", "claim", "margin is missing", "write margin = 0.01"},
		"confidence one":           {"margin = 0.01", "margin = 0.01\nconfidence = 1 # <-", "claim.confidence", "a confidence of 1 is out of range", "between 0.5 and 1"},
		"confidence half":          {"margin = 0.01", "margin = 0.01\nconfidence = 0.5 # <-", "claim.confidence", "a confidence of 0.5 is out of range", "between 0.5 and 1"},
		"unknown metric":           {"margin = 0.01", "margin = 0.01\nmetric = \"test acuracy\" # <-", "claim.metric", `unknown word "test acuracy"`, `did you mean "test accuracy"?`},
		"metric never evaluated":   {"margin = 0.01", "margin = 0.01\nmetric = \"validation loss\" # <-\n[training.evaluate]\nvalidation = \"never\"", "claim.metric", "the validation data is never evaluated", `training.evaluate = "last epoch"`},
		"metric without data":      {"test = 100", "test = 0", "claim", "the task has no test data", "give the task test data"},
		"duplicate arm":            {`storage = "bf16"`, "[[arm]]\nname = \"bf16\" # <-", "arm[2].name", `the name "bf16" is taken by the arm in plan.toml line 23`, "a name of its own"},
		"equal slugs":              {`storage = "bf16"`, "[[arm]]\nname = \"BF16!\" # <-", "arm[2].name", `the name "BF16!" and "bf16" in plan.toml line 23 are both "bf16"`, "a name of its own"},
		"reserved name":            {`name = "bf16"`, `name = "Baseline" # <-`, "arm[1].name", `"Baseline" is the name of the plan's own baseline`, "choose another name"},
		"name of no letters":       {`name = "bf16"`, `name = "--- !" # <-`, "arm[1].name", "has no letter or digit", "use letters"},
		"name missing":             {"[[arm]]\nname = \"bf16\"", "[[arm]] # <-", "arm[1]", "name is missing", "write name ="},
		"no arms":                  {"[[arm]]\nname = \"bf16\"\nstorage = \"bf16\"", "", "arm", "the plan has no arms", "write [[arm]]"},
		"arm with single brackets": {"[[arm]]", "[arm] # <-", "arm", "want an array of tables", "[[arm]] with double brackets"},
		"target of nothing":        {`[claim]`, "[claim]\nmetric = \"epochs to 0.9\" # <-", "claim.metric", `names no metric and target`, "epochs to test accuracy 0.9"},
		"target beyond reach":      {`[claim]`, "[claim]\nmetric = \"epochs to test accuracy 90\" # <-", "claim.metric", "can never be reached", "epochs to test accuracy 0.9"},
		"target seldom looked at":  {"epochs = 3\n[replicates]\ncount = 4\nfirst_seed = 100\n[claim]", "epochs = 3\nevaluate = \"last epoch\"\n[replicates]\ncount = 4\nfirst_seed = 100\n[claim]\nmetric = \"epochs to test accuracy 0.9\" # <-", "claim.metric", "evaluated only at the last epoch", `evaluate = "every epoch"`},
		"look_every alone":         {"count = 4", "look_every = 5", "replicates", "up_to is missing", "write up_to = 40"},
		"up_to alone":              {"count = 4", "up_to = 40", "replicates", "look_every is missing", "write look_every = 5"},
		"count and up_to":          {"count = 4", "up_to = 40\nlook_every = 5\ncount = 4 # <-", "replicates.count", "count and up_to exclude each other", "leave count out"},
		"no early look":            {"count = 4", "up_to = 5\nlook_every = 5 # <-", "replicates.look_every", "no look before the last", "fewer than up_to"},
		"look at one":              {"count = 4", "up_to = 5\nlook_every = 1 # <-", "replicates.look_every", "1 is out of range", "write 2 to"},
		"too many looks":           {"count = 4", "up_to = 200\nlook_every = 2 # <-", "replicates.look_every", "more than 40 looks", "write at least 5"},
		"zero replicates":          {"count = 4", "count = 0 # <-", "replicates.count", "0 is out of range", "write 1 to"},
		"replicates missing":       {"[replicates]\ncount = 4\nfirst_seed = 100\n", "", "replicates", "the table is missing", "write [replicates]"},
		"count of wrong type":      {"count = 4", "count = 4.0 # <-", "replicates.count", "4 is a number with a fraction, want a whole number", "count = "},
		"negative seed":            {"first_seed = 100", "first_seed = -1 # <-", "replicates.first_seed", "-1 is out of range", "write at least 0"},
		"contrast unknown arm":     {"[claim]", "[[contrast]]\narm = \"bf16\"\nagainst = \"fb16\" # <-\n[claim]", "contrast[1].against", `no arm is called "fb16"`, `did you mean "bf16"?`},
		"contrast with itself":     {"[claim]", "[[contrast]]\narm = \"bf16\"\nagainst = \"bf16\" # <-\n[claim]", "contrast[1].against", "compared with itself", "name another arm"},
		"contrast margin":          {"[claim]", "[[contrast]]\narm = \"bf16\"\nagainst = \"baseline\"\nmargin = 0.0 # <-\n[claim]", "contrast[1].margin", "a margin of 0 is not positive", "write a positive margin"},
		"contrast twice":           {"[claim]", "[[contrast]]\narm = \"bf16\"\nagainst = \"baseline\"\n[[contrast]] # <-\narm = \"bf16\"\nagainst = \"baseline\"\n[claim]", "contrast[2]", "the same contrast as in plan.toml line 18", "keep one of them"},
		"contrast without arm":     {"[claim]", "[[contrast]] # <-\nagainst = \"bf16\"\n[claim]", "contrast[1]", "arm is missing", "write arm ="},
		"batch too large":          {"batch = 20", "batch = 201 # <-", "training.batch", "a batch of 201 is larger than the 200 training examples", "write at most 200"},
		"arm's batch too large":    {`storage = "bf16"`, "training.batch = 201 # <-", "arm[1].training.batch", "a batch of 201 is larger than the 200 training examples", "write at most 200"},
		"batch zero":               {"batch = 20", "batch = 0 # <-", "training.batch", "0 is out of range", "write at least 1"},
		"learning rate zero":       {"learning_rate = 0.02", "learning_rate = 0 # <-", "training.learning_rate", "a learning rate of 0 is not a positive binary32 number", "write a positive rate"},
		"learning rate tiny":       {"learning_rate = 0.02", "learning_rate = 1e-60 # <-", "training.learning_rate", "is not a positive binary32 number", "write a positive rate"},
		"learning rate missing":    {"learning_rate = 0.02", "", "training", "learning_rate is missing", "write learning_rate = 0.02"},
		"multiply alone":           {"learning_rate = 0.02", "learning_rate = { start = 0.1, multiply = 0.5 } # <-", "training.learning_rate.multiply", "multiply without at_epochs", "write at_epochs"},
		"at_epochs alone":          {"learning_rate = 0.02", "learning_rate = { start = 0.1, at_epochs = [2] } # <-", "training.learning_rate", "at_epochs without multiply", "write multiply"},
		"at_epochs descend":        {"learning_rate = 0.02", "learning_rate = { start = 0.1, multiply = 0.5, at_epochs = [3, 2] } # <-", "training.learning_rate.at_epochs", "[3 2] do not ascend", "ascending"},
		"at_epochs from zero":      {"learning_rate = 0.02", "learning_rate = { start = 0.1, multiply = 0.5, at_epochs = [0] } # <-", "training.learning_rate.at_epochs[1]", "0 is out of range", "write at least 1"},
		"unknown optimizer":        {`optimizer = { kind = "sgd", momentum = 0.9 }`, `optimizer = "sdg" # <-`, "training.optimizer", `unknown optimizer "sdg"`, "write one of sgd"},
		"momentum":                 {`momentum = 0.9 }`, `momentum = 1 } # <-`, "training.optimizer", "momentum is 1", "it must be at least 0 and below 1"},
		"shuffle":                  {"epochs = 3", "epochs = 3\nshuffle = \"no\" # <-", "training.shuffle", "want true or false", "shuffle = true"},
		"evaluate":                 {"epochs = 3", "epochs = 3\nevaluate = \"last epcoh\" # <-", "training.evaluate", `unknown word "last epcoh"`, `did you mean "last epoch"?`},
		"diagnostics":              {"epochs = 3", "epochs = 3\ndiagnostics = \"sample\" # <-", "training.diagnostics", `unknown word "sample"`, `did you mean "sampled"?`},
		"arm may not reorder":      {`storage = "bf16"`, "training.shuffle = false # <-", "arm[1].training.shuffle", "unknown key", "write one of batch"},
		"learning rate twice":      {`storage = "bf16"`, "training.learning_rate = 0.1\nlearning_rate = 0.2 # <-", "arm[1].learning_rate", "the learning rate is set in plan.toml line 24 too", "keep one of them"},
		"loss scale kind":          {`storage = "bf16"`, `loss_scale = { kind = "fix", value = 8 } # <-`, "arm[1].loss_scale.kind", `unknown word "fix"`, `did you mean "fixed"?`},
		"loss scale value":         {`storage = "bf16"`, `loss_scale = { kind = "fixed", value = 0 } # <-`, "arm[1].loss_scale.value", "0 is out of range", "write a positive number"},
		"loss scale of nothing":    {`storage = "bf16"`, `loss_scale = "fixed" # <-`, "arm[1].loss_scale", "a fixed loss scale needs its value", "value = 1024"},
		"loss scale number":        {`storage = "bf16"`, `loss_scale = 1024 # <-`, "arm[1].loss_scale", "want a word or a table", `{ kind = "fixed", value = 1024 }`},
		"loss scale key":           {`storage = "bf16"`, `loss_scale = { kind = "fixed", value = 8, raise_by = 2 } # <-`, "arm[1].loss_scale.raise_by", "unknown key", "write one of kind, value"},
		"loss scale cut":           {`storage = "bf16"`, `loss_scale = { kind = "dynamic", cut_by = 1 } # <-`, "arm[1].loss_scale.cut_by", "1 is out of range", "between 0 and 1"},
		"baseline has no name":     {`everything = "fp32"`, "name = \"x\" # <-", "baseline.name", "unknown key", "write one of"},
		"title":                    {`title = "a title"`, "title = 3 # <-", "title", "3 is a whole number, want a text", `title = "..."`},
		"a date":                   {`title = "a title"`, "title = 1979-05-27 # <-", "title", "want a text", `title = "..."`},
		"claim missing":            {"[claim]\nmargin = 0.01", "", "claim", "the table is missing", "write [claim]"},
		"claim of wrong type":      {"[claim]\nmargin = 0.01", "[[claim]] # <-\nmargin = 0.01", "claim", "want a table", "write [claim]"},
		"unknown data":             {`data = "pump-vibration"`, `data = "pump-vibrations" # <-`, "task.data", `unknown word "pump-vibrations"`, `did you mean "pump-vibration"?`},
		"data missing":             {`data = "pump-vibration"`, "", "task", "data is missing", "write data ="},
		"unknown task key":         {"test = 100", "tset = 100 # <-", "task.tset", "unknown key", `did you mean "test"?`},
		"task key of wrong type":   {"test = 100", "test = { n = 100 } # <-", "task.test", "a table, want a single value", "test = ..."},
		"no training data":         {"train = 200", "train = 0 # <-", "task.train", "0 is out of range", ""},
		"syntax":                   {"batch = 20", "batch = = 20 # <-", "", "not valid TOML", "correct the line"},
		"duplicate key":            {"batch = 20", "batch = 20\nbatch = 21 # <-", "", "not valid TOML", "correct the line"},
		"misspelt required key":    {"learning_rate = 0.02", "lerning_rate = 0.02 # <-", "training.lerning_rate", "unknown key", `did you mean "learning_rate"?`},
		"misspelt required table":  {"[training]", "[trainning] # <-", "trainning", "unknown key", `did you mean "training"?`},
		"misspelt claim key":       {"margin = 0.01", "magin = 0.01 # <-", "claim.magin", "unknown key", `did you mean "margin"?`},
		"misspelt arms":            {"[[arm]]", "[[amr]] # <-", "amr", "unknown key", `did you mean "arm"?`},
		"misspelt arm's name":      {`name = "bf16"`, `nmae = "bf16" # <-`, "arm[1].nmae", "unknown key", `did you mean "name"?`},
		"misspelt data":            {`data = "pump-vibration"`, `dta = "pump-vibration" # <-`, "task.dta", "unknown key", `did you mean "data"?`},
		"empty":                    {basePlan, "# nothing yet", "", "the plan is empty", "write at least [task], [network], [training], [replicates], [claim] and one [[arm]]"},
		"epochs beyond all":        {"epochs = 3", "epochs = 9223372036854775807 # <-", "training.epochs", "is out of range", "write at most 2147483647"},
		"epochs and a half":        {"epochs = 3", "epochs = 3.5 # <-", "training.epochs", "3.5 is a number with a fraction", "write epochs = 3 or epochs = 4"},
		"batch in quotes":          {"batch = 20", `batch = "32" # <-`, "training.batch", `"32" is a text`, "write batch = 32"},
		"rate in quotes":           {"learning_rate = 0.02", `learning_rate = "0.1" # <-`, "training.learning_rate", `"0.1" is a text`, "write learning_rate = 0.1"},
		"units too large":          {`"relu", "dense 5"]`, "\n\"dense 999999999999999999999999\", # <-\n\"dense 5\"]", "network.layers[2]", "too large", "write at most"},
		"units negative":           {`"relu", "dense 5"]`, "\n\"dense -8\", # <-\n\"dense 5\"]", "network.layers[2]", "units is -8", "write 1 or more"},
		"one output too few":       {`"relu", "dense 5"]`, "\n\"dense 4\" # <-\n]", "network.layers[2]", `the last layer, "dense 4", has 4 outputs, but the task has 5 classes`, `write "dense 5"`},
		"exponent bits":            {`storage = "bf16"`, `storage = "E40M90" # <-`, "arm[1].storage", `format "E40M90": 40 exponent bits`, "write another format"},
		"table of no values":       {"[[arm]]", "[format.x]\nvalues = [] # <-\n[[arm]]", "format.x.values", "0 values", "as values = [-1, 0, 1]"},
		"nothing to tune":          {"[claim]", "[tuning]\nlearning_rate = [] # <-\n[claim]", "tuning.learning_rate", "the array is empty", "write the values to try"},
		"defined twice":            {"batch = 20", "batch = 20\nbatch = 21 # <-", "", "has already been defined", "correct the line"},
		"margin in percent":        {"margin = 0.01", "margin = 5 # <-", "claim.margin", "a margin of 5 is 500 percentage points", "margin = 0.05 for 5 percentage points"},
		"contrast margin of one":   {"[claim]", "[[contrast]]\narm = \"bf16\"\nagainst = \"baseline\"\nmargin = 1 # <-\n[claim]", "contrast[1].margin", "100 percentage points", "margin = 0.01"},
		"unclosed string":          {"batch = 20", "batch = \"20 # <-", "", "not valid TOML", "correct the line"},
		"not UTF-8":                {"batch = 20", "batch = 20 # <-\xff", "", "not UTF-8", "save the plan as UTF-8"},
	} {
		t.Run(name, func(t *testing.T) {
			if strings.Count(basePlan, c.old) != 1 {
				t.Fatalf("%q stands %d times in the plan", c.old, strings.Count(basePlan, c.old))
			}
			text := strings.Replace(basePlan, c.old, c.new, 1)
			all := failures(t, texts{"plan.toml": text}, "plan.toml")
			if len(all) != 1 {
				t.Fatalf("%d errors, want 1:\n%v", len(all), all)
			}
			e := all[0]
			if want := markedLine(text); want > 0 && e.Line != want {
				t.Errorf("line %d, want %d: %v", e.Line, want, e)
			}
			if c.key != "" && e.Key != c.key {
				t.Errorf("key %q, want %q: %v", e.Key, c.key, e)
			}
			if e.File != "plan.toml" || !strings.Contains(e.Reason, c.reason) || !strings.Contains(e.Remedy, c.remedy) {
				t.Errorf("got  %v\nwant %q; %q", e, c.reason, c.remedy)
			}
			if e.Line == 0 || strings.Contains(e.Error(), ".;") || e.Remedy == "" && c.remedy != "" {
				t.Errorf("no line, no remedy or two stops: %v", e)
			}
			if strings.ContainsAny(e.Error(), "\n\r") || e.Reason == "" {
				t.Errorf("not one line: %q", e.Error())
			}
		})
	}
}

// All that is wrong is told at once, in the order of lines.
func TestErrorsAreCollected(t *testing.T) {
	text := strings.NewReplacer("margin = 0.01", "margin = -1", "batch = 20", "batch = 0", `"bf16"`, `"bf61"`).Replace(basePlan)
	all := failures(t, texts{"plan.toml": text}, "plan.toml")
	if got, want := all.Error(), strings.Join([]string{
		`plan.toml:13: training.batch: 0 is out of range; write at least 1`,
		`plan.toml:19: claim.margin: a margin of -1 is not positive; write a positive margin, as 0.01`,
		`plan.toml:24: arm[1].storage: unknown format "bf61"; did you mean "bf16"?`,
	}, "\n"); got != want {
		t.Errorf("got\n%s\nwant\n%s", got, want)
	}
}

func TestErrorsOfFilesStayTogether(t *testing.T) {
	e := func(file string, line int) *PlanError { return &PlanError{File: file, Line: line, Reason: "r"} }
	all := Errors{e("b", 9), e("a", 5), e("b", 2), e("a", 1), e("a", 5)}.inOrder()
	if got := strings.Join(strings.Fields(all.Error()), " "); got != "b:2: r b:9: r a:1: r a:5: r a:5: r" {
		t.Error(got)
	}
}

func TestErrorStaysOneLine(t *testing.T) {
	all := failures(t, texts{"plan.toml": basePlan + "\"new\\nline\\u2028\" = 1\n"}, "plan.toml")
	if len(all) != 1 || strings.ContainsAny(all[0].Error(), "\n\u2028") {
		t.Errorf("%q", all.Error())
	}
	long := strings.Replace(basePlan, `"bf16"`, `"`+strings.Repeat("é", 5000)+`"`, -1)
	if all = failures(t, texts{"plan.toml": long}, "plan.toml"); len(all.Error()) > 2000 || !utf8.ValidString(all.Error()) {
		t.Errorf("%d bytes", len(all.Error()))
	}
}
