// Pores by the plain practice: one global threshold half way between air and material, 26-connected air
// inside the part, label voxels counted. For comparison with that practice; pore_segmentation.h explains what
// it loses on small pores.
#pragma once

#include "analysis/pore_segmentation.h"

namespace halfmark {

// Air (grey < levels.threshold) inside PartMap::inside; of the whole field where the part has no outside.
// Pores of at least options.min_voxels, sorted by falling volume, then by their first voxel (z, y, x).
// Centre: of the label's voxels. Kind: open where the label holds open air, else cut_by_field where it
// reaches the field's border, else closed. Windows and labels are the same, and each of their voxels counts
// whole.
//
// The volume's uncertainty is a first estimate from the label's surface voxels: the threshold's, noise and
// digitisation move the surface; what blur takes from a round void (3 sigma^2/r^2 of its volume, which is the
// leading term for a Gaussian blur) is not corrected and counts in full.
SegmentedPores segment_pores_iso50(const VolumeSource& source, const FieldOfView& field,
                                   const GreyLevels& levels, const PartMap& part, const PoreSpec& options,
                                   const RunControl& control = {});

}  // namespace halfmark
