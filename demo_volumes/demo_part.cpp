#include "demo_volumes/demo_part.h"

#include "demo_volumes/parts.h"

namespace halfmark {

namespace {

struct Entry {
  const char* name;
  const char* sentence;
  DemoPart (*make)(const DemoOptions&);
};

constexpr Entry entries[] = {
    {"bracket",
     "a cast bracket with gas pores, shrinkage, an open pore, an inclusion and a thin rib: rejected",
     bracket_part},
    {"grille", "a printed grille whose thinnest wall is too near its limit to tell: undecided", grille_part},
    {"sound_block", "a flawless block with a bore: accepted", sound_block_part},
    {"casting", "a porous casting of any size, for speed and memory: rejected", casting_part},
};

const Entry& entry_of(const std::string& name) {
  std::string known;
  for (const Entry& entry : entries) {
    if (name == entry.name) return entry;
    known += (known.empty() ? "" : ", ") + std::string(entry.name);
  }
  throw Problem(ExitStatus::usage, "unknown demo part '" + name + "'; known are " + known);
}

}  // namespace

std::vector<std::string> demo_names() {
  std::vector<std::string> names;
  for (const Entry& entry : entries) names.emplace_back(entry.name);
  return names;
}

std::string demo_sentence(const std::string& name) { return entry_of(name).sentence; }

DemoPart demo_part(const std::string& name, const DemoOptions& options) {
  const Entry& entry = entry_of(name);
  if (options.scale < 1 || options.scale > 16)
    throw Problem(ExitStatus::usage,
                  "demo: the scale must lie in 1 to 16, not " + std::to_string(options.scale));
  if (options.edge_voxels < 64 || options.edge_voxels > 4096) {
    throw Problem(ExitStatus::usage,
                  "demo: the edge must lie in 64 to 4096 voxels, not " + std::to_string(options.edge_voxels));
  }
  return entry.make(options);
}

}  // namespace halfmark
