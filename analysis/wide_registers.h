// Marks a small loop over integers, or over independent floats, to be compiled for wider registers as well and chosen
// at run time. The results are the same bits; only elementwise work may carry the mark.
#pragma once

#if defined(__x86_64__) && defined(__GNUC__) && !defined(__clang__) && !defined(__SANITIZE_ADDRESS__)
#define HALFMARK_FOR_WIDE_REGISTERS __attribute__((target_clones("avx2", "default")))
#else
#define HALFMARK_FOR_WIDE_REGISTERS
#endif
