// Package scratches is the stage that finds lines too faint for any of their pixels to
// stand out, and makes scratches of them. It judges no limits.
//
// Every straight line of the contrast plane is summed along (package lines); what stands
// out is refined, followed along its bend and held against how far lay makes lines of that
// place and direction scatter. A line that runs along the region's border, or whose evidence
// is a few spots, is none.
//
// Where the stage blobs saw the same scratch, one defect remains: the line where it is the
// longer one, with the pieces in it, else the blob. A dig on a scratch stays a dig when it
// is clearly wider or higher than the scratch.
package scratches
