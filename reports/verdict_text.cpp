#include "reports/verdict_text.h"
