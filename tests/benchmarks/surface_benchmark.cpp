// The surface of a 512^3 16-bit casting, beside the iso-surface of VTK on the same volume, and the walls of
// its outer surface. HALFMARK_BENCHMARK_EDGE sets another edge length.
#include <benchmark/benchmark.h>
#include <vtkFlyingEdges3D.h>
#include <vtkImageData.h>
#include <vtkNew.h>

#include <cstdlib>
#include <cstring>

#include "analysis/wall_thickness.h"
#include "tests/support/casting.h"
#include "tests/support/meshes.h"

using namespace halfmark;

namespace {

struct Case {
  MemoryVolume volume;
  FieldOfView field;
  GreyLevels levels;
  PartMap part;
};

const Case& the_casting() {
  static const Case made = [] {
    const char* wanted = std::getenv("HALFMARK_BENCHMARK_EDGE");
    const std::int64_t edge = wanted != nullptr ? std::atoll(wanted) : 512;
    MemoryVolume volume = phantoms::casting(edge);
    FieldOfView field = meshes::all_of(volume.geometry());
    GreyLevels levels = meshes::given_levels(8000, 40000);
    levels.blur_voxel = 0.8;
    levels.air_noise = levels.material_noise = 2000;
    PartOptions options;
    options.closing_radius_mm = 4;
    PartMap part = find_part(volume, field, levels, options);
    return Case{std::move(volume), std::move(field), std::move(levels), std::move(part)};
  }();
  return made;
}

void surface(benchmark::State& state) {
  const Case& c = the_casting();
  std::size_t triangles = 0;
  for (auto _ : state) triangles = extract_surface(c.volume, c.field, c.levels, c.part).triangles.size();
  state.counters["triangles"] = static_cast<double>(triangles);
}

void surface_by_vtk(benchmark::State& state) {
  const Case& c = the_casting();
  const auto& size = c.volume.geometry().size;
  vtkNew<vtkImageData> image;
  image->SetDimensions(static_cast<int>(size[0]), static_cast<int>(size[1]), static_cast<int>(size[2]));
  image->AllocateScalars(VTK_UNSIGNED_SHORT, 1);
  std::memcpy(image->GetScalarPointer(), c.volume.resident(),
              static_cast<std::size_t>(c.volume.geometry().voxel_count()) * 2);
  vtkIdType triangles = 0;
  for (auto _ : state) {
    vtkNew<vtkFlyingEdges3D> contour;
    contour->SetInputData(image);
    contour->SetValue(0, c.levels.threshold);
    contour->ComputeNormalsOff();
    contour->ComputeScalarsOff();
    contour->Update();
    triangles = contour->GetOutput()->GetNumberOfCells();
  }
  state.counters["triangles"] = static_cast<double>(triangles);
}

void area_and_volume(benchmark::State& state) {
  const Case& c = the_casting();
  const TriangleMesh mesh = extract_surface(c.volume, c.field, c.levels, c.part);
  for (auto _ : state) benchmark::DoNotOptimize(surface_area_mm2(mesh) + enclosed_volume_mm3(mesh));
}

void walls(benchmark::State& state) {
  const Case& c = the_casting();
  SurfaceOptions outer;
  outer.fill_pores = true;
  const TriangleMesh mesh = extract_surface(c.volume, c.field, c.levels, c.part, outer);
  WallSpec spec;
  spec.max_mm = static_cast<double>(state.range(0));
  spec.patch_mm2 = 25;
  double least = 0;
  for (auto _ : state) {
    const WallMap map = measure_walls(mesh, c.volume.geometry(), c.part, c.levels, spec);
    least = summarise_walls(mesh, map, spec, {}, 0).least_mm.value;
  }
  state.counters["vertices"] = static_cast<double>(mesh.vertices_mm.size());
  state.counters["least"] = least;
}

}  // namespace

BENCHMARK(surface)->Unit(benchmark::kMillisecond)->UseRealTime()->MinTime(2);
BENCHMARK(surface_by_vtk)->Unit(benchmark::kMillisecond)->UseRealTime()->MinTime(2);
BENCHMARK(area_and_volume)->Unit(benchmark::kMillisecond)->UseRealTime();
BENCHMARK(walls)->Arg(40)->Arg(160)->Unit(benchmark::kMillisecond)->UseRealTime()->Iterations(1);
BENCHMARK_MAIN();
