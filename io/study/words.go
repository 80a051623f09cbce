package study

// Missing says what happens to missing, NaN and infinite values.
type Missing uint8

const (
	Refuse   Missing = iota // the run is refused
	DropRows                // rows with a missing value are left out
	FillMean                // filled with the draw's own mean
	OwnLevel                // categories: missing is a level of its own; numbers must be complete
)

var missingWords = []string{"refuse", "drop-rows", "fill-mean", "own-level"}

// String returns the word of the study file.
func (m Missing) String() string { return word(missingWords, m) }

// Kind says what the outcome is.
type Kind uint8

const (
	Number   Kind = iota // gaussian
	YesNo                // binomial
	Count                // poisson
	Classes              // multinomial
	Survival             // Cox
)

var kindWords = []string{"number", "yes-no", "count", "classes", "survival"}

// String returns the word of the study file.
func (k Kind) String() string { return word(kindWords, k) }

// Ties is how the Cox likelihood treats equal event times.
type Ties uint8

const (
	Efron Ties = iota
	Breslow
)

var tiesWords = []string{"efron", "breslow"}

// String returns the word of the study file.
func (t Ties) String() string { return word(tiesWords, t) }

// GroupWeight is how the penalty of a group grows with its directions.
type GroupWeight uint8

const (
	Even GroupWeight = iota // luck lets a group in as often as a single column
	Sqrt                    // the square root of the number of directions
)

var groupWeightWords = []string{"even", "sqrt"}

// String returns the word of the study file.
func (g GroupWeight) String() string { return word(groupWeightWords, g) }

// Design is how rows are drawn.
type Design uint8

const (
	Halves    Design = iota // complementary pairs of disjoint halves
	Bootstrap               // as many rows as there are, with replacement
)

var designWords = []string{"halves", "bootstrap"}

// String returns the word of the study file.
func (d Design) String() string { return word(designWords, d) }

// word looks a value up; one outside the list is a caller's slip that no
// study file can cause, and is shown rather than hidden.
func word[T ~uint8](words []string, value T) string {
	if int(value) < len(words) {
		return words[value]
	}
	return "unknown"
}
