// Package job turns the text of a job file or of a survey file (TOML) into
// checked values, and a job back into text.
//
// [Parse] reads a job, fills in the defaults and lists every violation at once,
// each with its line, what was found and what was expected. [Job.Write] writes
// the job as resolved, which parses back to the same job. [Job.With] changes
// settings by their dotted keys ("trial.noise"), under the same checks;
// [ParseSurvey] reads which settings to vary.
//
// The keys are the struct tags of [Job] and its tables and nothing else:
//
//	toml     name of the key
//	what     what a text is, for messages
//	of       the values allowed, separated by spaces
//	when     conditions under which the key applies, all of which must hold:
//	         "source=molecule|hubbard" (a key of the same table has one of the
//	         values) or "active|file" (one of the keys is set)
//	need     present where the key must be given whenever it applies
//	default  value where the key is absent; without one the zero value
//	above    exclusive lower bound of a number, or of each number of a list
//	least    inclusive lower bound
//	most     inclusive upper bound
//	doc      comment written beside the key
//
// What a file named in a job holds is not looked at here. Nothing in the package
// reads or writes files; a Job may be read by several goroutines at once.
package job
