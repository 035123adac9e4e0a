// Package experiments runs plans: it turns arms x replicates into runs, runs
// them on several workers, keeps what came out in a store, and builds from plan
// and store the study that terminal and report show.
//
// # Runs
//
// A run is one arm x one replicate. Its key is a SHA-256 of everything that
// decides its bits: the arithmetic version, the resolved arm without its name,
// the task with its network, the data, the replicate's seed and, where arms
// start from pretrained weights, the key of the pretraining (see runKey). What
// is stored under a key is not run again, whoever ran it; a run that was broken
// off or failed starts over. Two arms with the same arithmetic have the same
// keys: they are run once and listed under both names.
//
// # Order
//
// Replicates are taken one after another, and within each first the
// pretraining, then the baseline, then the arms in the order of the plan. A
// worker without work in the replicates at hand opens the next one. The data of a
// replicate is loaded once, shared by its runs, and let go after the last; never
// are more replicates open than there are workers. No result depends on this
// order: the bits of a run depend on its key alone. A worker for which there is no
// run, while a pretraining or the last runs are under way, helps with the larger
// products of the others (trainer.Team), which changes no bit either.
//
// # Looks
//
// A plan with looks asks for replicates in ascending order, up to one look after the
// other, and stops at the first at which every verdict has fallen (or the baseline
// has diverged); what the looks cost is accounted for in package results/compare. A
// look judges the first replicates alone, whatever else the store holds, so a plan
// that is taken up again stops where an undisturbed one does. The bits of the runs
// do not depend on the looks. An arm with the baseline's own bits is decided only at
// the last look: differences without spread say nothing before.
//
// # Tuning
//
// A plan with a tuning is two plans one after the other, of one study and under one
// claim: first its trials, arm/trial by arm/trial on the tuning's seeds, then its arms
// with what was chosen for them. The choice follows from the stored trials alone, so
// it is the same whoever reads it; runs of both are stored under keys like any other,
// shared with plans that spell the same values out.
//
// # The study
//
// What identifies a study, so that its claim can be fixed once, is the task with
// its network and pretraining, and the arms with their names, in any order. Title,
// question, replicates and claim do not: changing those is changing one's mind
// about the same study, and shows. A plan with another arm is another study; the
// store tells it how many of its runs were there before its claim.
//
// # Costs
//
// Costs hands a plan's shapes and resolved points to the cost model of package
// results/cost, without running anything. The bits of an arm in a study are that
// model's bits a value in training memory.
//
// # Ends
//
// A run that fails, by an error or a panic, is stored as failed with its cause;
// the others go on. A run that diverges is a result. If the baseline or a
// pretraining diverges, all runs are still done and stored, but Run returns
// ErrBaseline and no verdict is given. A cancelled context ends within a second:
// runs in flight are marked as broken off, everything else is kept.
package experiments
