// The porosity path beside two ways of doing the same with ITK's filters, on the same demo casting (1 % gas
// pores of 3 to 30 voxels) in one run:
//
//   ours   field of view, grey levels, part, material level, local pores, all descriptors
//   full   ITK: Otsu threshold, hole filling, pores = filled - material, connected components, shape label
//   map
//          with Feret diameters and perimeter
//   short  ITK: fixed threshold, air labelled, border component dropped, shape label map without Feret
//   diameters
//
// Options: --edge=N (512), --rounds=N (3), --memory (only ours, once: prints the peak resident memory),
// --iso50 (ours by one threshold). Google Benchmark's own options follow.
#include <benchmark/benchmark.h>
#include <itkBinaryFillholeImageFilter.h>
#include <itkBinaryThresholdImageFilter.h>
#include <itkConnectedComponentImageFilter.h>
#include <itkImportImageFilter.h>
#include <itkLabelImageToShapeLabelMapFilter.h>
#include <itkMultiThreaderBase.h>
#include <itkOtsuThresholdImageFilter.h>
#include <itkShapeLabelObject.h>
#include <itkSubtractImageFilter.h>

#include <algorithm>
#include <chrono>
#include <cstdint>
#include <cstdio>
#include <cstring>
#include <ctime>
#include <fstream>
#include <functional>
#include <map>
#include <memory>
#include <string>
#include <thread>
#include <vector>

#include "analysis/field_of_view.h"
#include "analysis/grey_levels.h"
#include "analysis/material_level.h"
#include "analysis/part_map.h"
#include "analysis/pore_iso50.h"
#include "analysis/pore_segmentation.h"
#include "analysis/pore_shape.h"
#include "demo_volumes/demo_part.h"

using namespace halfmark;

namespace {

double seconds() {
  return std::chrono::duration<double>(std::chrono::steady_clock::now().time_since_epoch()).count();
}

// Seconds of all threads together: hardly changed by what else the machine does.
double processor_seconds() {
  timespec now{};
  clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
  return static_cast<double>(now.tv_sec) + 1e-9 * static_cast<double>(now.tv_nsec);
}

struct Moment {
  double wall = seconds(), processor = processor_seconds();
};

struct Rounds {
  std::vector<double> wall, processor;
  void add(const Moment& from, const Moment& to) {
    wall.push_back(to.wall - from.wall);
    processor.push_back(to.processor - from.processor);
  }
};

// Times of the named steps, every round.
using Times = std::map<std::string, Rounds>;

class Stopwatch {
 public:
  Stopwatch(Times& times, std::string way) : times_(times), way_(std::move(way)) {}
  void lap(const std::string& step) {
    const Moment now;
    times_[way_ + ": " + step].add(last_, now);
    last_ = now;
  }
  void stop() { times_[way_].add(start_, Moment()); }

 private:
  Times& times_;
  std::string way_;
  Moment start_, last_ = start_;
};

std::size_t run_ours(const MemoryVolume& volume, PoreMethod method, Times& times) {
  PoreSpec spec;
  spec.method = method;
  Stopwatch watch(times, "ours");
  const FieldOfView field = find_field_of_view(volume);
  watch.lap("1 field of view");
  const GreyLevels levels = find_grey_levels(volume, field);
  watch.lap("2 grey levels");
  const PartMap part = find_part(volume, field, levels);
  watch.lap("3 part");
  SegmentedPores found;
  if (method == PoreMethod::local) {
    const MaterialLevel level = fit_material_level(volume, field, levels, part);
    watch.lap("4 material level");
    found = segment_pores(volume, field, levels, part, level, spec);
  } else {
    found = segment_pores_iso50(volume, field, levels, part, spec);
  }
  watch.lap("5 pores");
  describe_pores(found, volume.geometry(), part, levels);
  watch.lap("6 descriptors");
  watch.stop();
  return found.pores.size();
}

using Grey = itk::Image<std::uint16_t, 3>;
using Mask = itk::Image<std::uint8_t, 3>;
using Labels = itk::Image<std::uint32_t, 3>;
using ShapeObject = itk::ShapeLabelObject<std::uint32_t, 3>;
using ShapeMap = itk::LabelMap<ShapeObject>;

// The same bytes, not a copy.
Grey::Pointer itk_view(MemoryVolume& volume) {
  const auto import = itk::ImportImageFilter<std::uint16_t, 3>::New();
  const auto& g = volume.geometry();
  Grey::SizeType size;
  for (unsigned k = 0; k < 3; ++k) size[k] = static_cast<itk::SizeValueType>(g.size[k]);
  import->SetRegion(Grey::RegionType(size));
  const double spacing[3] = {g.spacing_mm[0], g.spacing_mm[1], g.spacing_mm[2]};
  import->SetSpacing(spacing);
  import->SetImportPointer(volume.voxels<std::uint16_t>(), static_cast<std::size_t>(g.voxel_count()), false);
  import->Update();
  return import->GetOutput();
}

std::size_t shapes_of(Labels* labels, bool feret, Stopwatch& watch) {
  const auto shapes = itk::LabelImageToShapeLabelMapFilter<Labels, ShapeMap>::New();
  shapes->SetInput(labels);
  shapes->SetComputeFeretDiameter(feret);
  shapes->SetComputePerimeter(true);
  shapes->Update();
  watch.lap("shapes");
  return shapes->GetOutput()->GetNumberOfLabelObjects();
}

std::size_t run_full(Grey* grey, Times& times) {
  Stopwatch watch(times, "full");
  const auto otsu = itk::OtsuThresholdImageFilter<Grey, Mask>::New();
  otsu->SetInput(grey);
  otsu->SetInsideValue(0);
  otsu->SetOutsideValue(1);
  otsu->Update();
  watch.lap("Otsu");
  const auto fill = itk::BinaryFillholeImageFilter<Mask>::New();
  fill->SetInput(otsu->GetOutput());
  fill->SetForegroundValue(1);
  fill->Update();
  watch.lap("fill holes");
  const auto pores = itk::SubtractImageFilter<Mask, Mask, Mask>::New();
  pores->SetInput1(fill->GetOutput());
  pores->SetInput2(otsu->GetOutput());
  const auto components = itk::ConnectedComponentImageFilter<Mask, Labels>::New();
  components->SetInput(pores->GetOutput());
  components->FullyConnectedOn();
  components->Update();
  watch.lap("components");
  const std::size_t n = shapes_of(components->GetOutput(), true, watch);
  watch.stop();
  return n;
}

std::size_t run_short(Grey* grey, double threshold, Times& times) {
  Stopwatch watch(times, "short");
  const auto air = itk::BinaryThresholdImageFilter<Grey, Mask>::New();
  air->SetInput(grey);
  air->SetUpperThreshold(static_cast<std::uint16_t>(threshold));
  air->SetInsideValue(1);
  air->SetOutsideValue(0);
  const auto components = itk::ConnectedComponentImageFilter<Mask, Labels>::New();
  components->SetInput(air->GetOutput());
  components->FullyConnectedOn();
  components->Update();
  watch.lap("components");
  Labels* labels = components->GetOutput();
  std::uint32_t* label = labels->GetBufferPointer();
  const std::size_t voxels = labels->GetLargestPossibleRegion().GetNumberOfPixels();
  const std::uint32_t outside = label[0];
  for (std::size_t i = 0; i < voxels; ++i) label[i] = label[i] == outside ? 0 : label[i];
  watch.lap("drop the border's");
  const std::size_t n = shapes_of(labels, false, watch);
  watch.stop();
  return n;
}

double median(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  return values[values.size() / 2];
}

double peak_resident_bytes() {
  std::ifstream status("/proc/self/status");
  for (std::string line; std::getline(status, line);) {
    if (line.rfind("VmHWM:", 0) == 0) return 1024 * std::stod(line.substr(6));
  }
  return 0;
}

// The volume is rendered first, so the mark of the peak is set back before the run.
void print_memory(const MemoryVolume& volume, PoreMethod method) {
  std::ofstream("/proc/self/clear_refs") << "5";
  const double before = peak_resident_bytes();
  Times times;
  const std::size_t pores = run_ours(volume, method, times);
  const double bytes = static_cast<double>(volume.geometry().voxel_count()) * 2;
  const double peak = peak_resident_bytes();
  std::printf("volume %.0f MB, %zu pores; resident before %.0f MB, peak %.0f MB: %.2f times the volume\n",
              bytes / 1e6, pores, before / 1e6, peak / 1e6, peak / bytes);
  std::printf("peak over what was there before: %.2f times the volume\n", 1 + (peak - before) / bytes);
}

void print_times(const Times& times) {
  std::printf("\nmedian seconds over %zu rounds, %u cores, %u ITK threads\n", times.at("ours").wall.size(),
              std::thread::hardware_concurrency(), itk::MultiThreaderBase::GetGlobalDefaultNumberOfThreads());
  std::printf("  %-28s %8s %12s\n", "", "elapsed", "of all cores");
  for (const auto& [name, rounds] : times) {
    std::printf("  %-28s %8.3f %12.3f\n", name.c_str(), median(rounds.wall), median(rounds.processor));
  }
  const auto print_ratio = [&](const char* what, const char* way) {
    const Rounds &ours = times.at("ours"), &other = times.at(way);
    std::printf("%s %.3f elapsed, %.3f of all cores\n", what, median(ours.wall) / median(other.wall),
                median(ours.processor) / median(other.processor));
  };
  print_ratio("ours / ITK full chain (at most 0.2):", "full");
  print_ratio("ours / ITK short form (aim: at most 1):", "short");
}

std::string option(int& argc, char** argv, const std::string& name, const std::string& otherwise) {
  std::string value = otherwise;
  for (int i = 1; i < argc;) {
    const std::string arg = argv[i];
    if (arg != name && arg.rfind(name + "=", 0) != 0) {
      ++i;
      continue;
    }
    value = arg == name ? "yes" : arg.substr(name.size() + 1);
    std::rotate(argv + i, argv + i + 1, argv + argc);
    --argc;
  }
  return value;
}

}  // namespace

int main(int argc, char** argv) {
  const std::int64_t edge = std::stoll(option(argc, argv, "--edge", "512"));
  const int rounds = std::stoi(option(argc, argv, "--rounds", "3"));
  const bool memory_only = option(argc, argv, "--memory", "") == "yes";
  const PoreMethod method =
      option(argc, argv, "--iso50", "") == "yes" ? PoreMethod::iso50 : PoreMethod::local;
  benchmark::Initialize(&argc, argv);
  if (benchmark::ReportUnrecognizedArguments(argc, argv)) return 64;

  DemoOptions casting;
  casting.edge_voxels = edge;
  const DemoPart part = demo_part("casting", casting);
  MemoryVolume volume = render_scan(part.bodies, part.geometry, part.scan);
  if (memory_only) {
    print_memory(volume, method);
    return 0;
  }
  const Grey::Pointer grey = itk_view(volume);
  const double threshold = (part.scan.air_grey + part.scan.material_grey) / 2;
  Times times;
  const auto add = [&](const std::string& name, const std::function<std::size_t()>& run) {
    benchmark::RegisterBenchmark(name.c_str(),
                                 [run](benchmark::State& state) {
                                   std::size_t pores = 0;
                                   for (auto _ : state) pores = run();
                                   state.counters["pores"] = static_cast<double>(pores);
                                 })
        ->Unit(benchmark::kMillisecond)
        ->UseRealTime()
        ->Iterations(1);
  };
  for (int round = 0; round < rounds; ++round) {  // interleaved: what the machine does else hits all alike
    const std::string suffix = "/round:" + std::to_string(round + 1);
    add("ours" + suffix, [&] { return run_ours(volume, method, times); });
    add("itk_full" + suffix, [&] { return run_full(grey, times); });
    add("itk_short" + suffix, [&] { return run_short(grey, threshold, times); });
  }
  benchmark::RunSpecifiedBenchmarks();
  if (times.count("ours") != 0 && times.count("full") != 0 && times.count("short") != 0) print_times(times);
  return 0;
}
