//go:build !unix

package deal

import "errors"

func lock(string) (func(), error) {
	return nil, errors.New("deal: there is no Slurm for this system")
}
