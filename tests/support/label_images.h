// Labels as ITK images, to compare with ITK's filters.
#pragma once

#include <itkImage.h>

#include <algorithm>
#include <cstdint>

#include "tests/support/label_runs.h"

namespace halfmark::tests {

using LabelImage = itk::Image<std::uint32_t, 3>;

inline LabelImage::Pointer label_image(const RunLabels& labels, const Vec3& spacing_mm) {
  const auto image = LabelImage::New();
  const auto& n = labels.size();
  image->SetRegions(
      LabelImage::SizeType{{static_cast<itk::SizeValueType>(n[0]), static_cast<itk::SizeValueType>(n[1]),
                            static_cast<itk::SizeValueType>(n[2])}});
  const double spacing[3] = {spacing_mm[0], spacing_mm[1], spacing_mm[2]};
  image->SetSpacing(spacing);
  image->Allocate(true);
  std::uint32_t* row = image->GetBufferPointer();
  for (std::int64_t z = 0; z < n[2]; ++z) {
    for (std::int64_t y = 0; y < n[1]; ++y, row += n[0]) {
      for (const LabelRun& r : labels.row(y, z)) {
        std::fill(row + r.begin, row + r.end, static_cast<std::uint32_t>(r.label));
      }
    }
  }
  return image;
}

}  // namespace halfmark::tests
