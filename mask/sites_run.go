package mask

import (
	"context"
	"errors"
)

// EvaluateSites evaluates every site under every look, exactly at the sites'
// places on the bilinear surface, by range lines through them. The results
// stand in the order of the sites, and of the looks within a site: that of site
// i and look j at i*len(job.Looks)+j. A site outside the DEM or on a hole is no
// error: its results say so. Errors are those of Run, a site with a negative
// height or footprint or a cell outside the grid, and a negative DEM error.
func EvaluateSites(ctx context.Context, job SitesJob) ([]SiteResult, error) {
	return nil, errors.New("sites are not evaluated")
}
