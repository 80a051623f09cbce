package rundir

import "holdfast/solver"

// Certificate is how well one draw was fitted.
type Certificate struct {
	Draw           int
	Violation, Gap float64 // worst over its steps
	Borderline     int     // steps at which a candidate stood on the border and stayed out
	Twins          int     // entries at steps where linearly dependent candidates share the fit
	Redraws        int     // how often it was made anew because it could not be fitted
	Uncertified    bool    // its path ended before a step that could not be certified
}

// CertificateOf returns the certificate of a draw's path.
func CertificateOf(draw int, p *solver.Path) Certificate {
	return Certificate{
		Draw: draw, Violation: p.Violation, Gap: p.Gap, Borderline: p.Borderline, Twins: p.Twins,
		Redraws: p.Redraws, Uncertified: p.Stop == solver.StopUncertified,
	}
}
