#include "demo_volumes/demo_part.h"
