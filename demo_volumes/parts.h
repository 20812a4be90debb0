// The descriptions behind demo_part(), one file each.
#pragma once

#include "demo_volumes/demo_part.h"

namespace halfmark {

DemoPart bracket_part(const DemoOptions& options);      // bracket.cpp
DemoPart grille_part(const DemoOptions& options);       // grille.cpp
DemoPart sound_block_part(const DemoOptions& options);  // sound_block.cpp
DemoPart casting_part(const DemoOptions& options);      // casting.cpp

}  // namespace halfmark
