// Package judge turns the claims of a rule into verdicts on a model.
//
// # Words
//
// A question is one claim at one start (a root together with one instance, or
// with all instances born on its paths). Its verdict is one of three: it holds
// (no path of the model breaks the claim), it is broken (a path breaks it), or
// it is undecided (a budget ran out, or the answer hangs on a doubt). Every
// question has exactly one verdict, so that the three add up.
//
// A contract is an unevenness by design. A lender leaves the same surplus on
// every normal return, or on exactly those that say success (Lock, TryTake); a
// settler gives exactly that back on every normal return and never takes
// (Unlock). A lender and a settler of one place excuse each other, and a user
// reads "taken as a pair". A function that gives back first and takes again
// before it returns is judged as one whose caller holds the instance.
//
// # Phases
//
// Judge works through one rule in this order, for each start in the model's
// order and for each claim in the rule's:
//
//  1. ask for the greatest weight of the claim's questions over the accepted
//     exits (ask.go: which exits a checkpoint accepts);
//  2. look for a contract that excuses the answer (contract.go);
//  3. ask again with every doubt taken that would mend the path, or, of what
//     held, with every doubt taken that would break it: undecided if that
//     changes the answer;
//  4. take the shortest witness and replay it (path.go) with code that shares
//     nothing with the search;
//  5. find the frame and the step to blame (blame.go), word the finding
//     (words.go), switch the cause off and ask again.
//
// Merge puts the results of all rules together: findings of different starts
// with equal keys become one, the shortest path wins, ties go by position.
//
// # Exact and not
//
// On the model, holds and broken are exact for claims that are conjunctions of
// linear inequalities; a claim that needs the count image is undecided here.
// What the model leaves out is listed in the assumptions.
package judge
