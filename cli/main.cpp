#include <cstdio>

int main() {
  std::puts("halfmark");
  return 64;
}
