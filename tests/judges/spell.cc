// SPDX-License-Identifier: Apache-2.0
#include "judges/spell.h"

namespace steelyard::judges {

double Spoiler::spoil(double value, double since_days) {
  switch (fault_.kind) {
    case Kind::kOffset:
      return value + fault_.size;
    case Kind::kDrift:
      return value + fault_.size * since_days;
    case Kind::kFreeze:
      return held_;
    case Kind::kNoise:
      return value + fault_.size * random_.normal();
    case Kind::kScale:
      return value * fault_.size;
  }
  return value;
}

}  // namespace steelyard::judges
