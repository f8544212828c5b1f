// Read a raw-data file with the standard's own library, to compare with what was written.
// Usage: read_with_standard_library RAW.h5 OUT.bin
// OUT.bin: for each acquisition its head as the library holds it (340 bytes), then its samples (complex64).
// Standard output: what the library understands of the header, one "name value" a line.
#include <ismrmrd/dataset.h>
#include <ismrmrd/xml.h>

#include <cstdio>
#include <string>

static void print_limit(const char* name, const ISMRMRD::Optional<ISMRMRD::Limit>& limit) {
  if (limit) std::printf("%s %d %d %d\n", name, limit->minimum, limit->maximum, limit->center);
}

int main(int argc, char** argv) {
  if (argc != 3) return 2;
  ISMRMRD::Dataset dataset(argv[1], "dataset", false);
  std::string xml;
  dataset.readHeader(xml);
  ISMRMRD::IsmrmrdHeader header;
  ISMRMRD::deserialize(xml.c_str(), header);
  const ISMRMRD::Encoding& encoding = header.encoding.at(0);
  const ISMRMRD::EncodingSpace& e = encoding.encodedSpace;
  const ISMRMRD::EncodingSpace& r = encoding.reconSpace;
  std::printf("encoded %d %d %d %g %g %g\n", e.matrixSize.x, e.matrixSize.y, e.matrixSize.z, e.fieldOfView_mm.x,
              e.fieldOfView_mm.y, e.fieldOfView_mm.z);
  std::printf("recon %d %d %d %g %g %g\n", r.matrixSize.x, r.matrixSize.y, r.matrixSize.z, r.fieldOfView_mm.x,
              r.fieldOfView_mm.y, r.fieldOfView_mm.z);
  print_limit("kspace_encoding_step_1", encoding.encodingLimits.kspace_encoding_step_1);
  print_limit("slice", encoding.encodingLimits.slice);
  print_limit("contrast", encoding.encodingLimits.contrast);
  print_limit("average", encoding.encodingLimits.average);
  print_limit("repetition", encoding.encodingLimits.repetition);
  std::printf("cartesian %d\n", encoding.trajectory == ISMRMRD::TrajectoryType::CARTESIAN);
  std::printf("resonance %ld\n", (long)header.experimentalConditions.H1resonanceFrequency_Hz);
  const ISMRMRD::AcquisitionSystemInformation& system = *header.acquisitionSystemInformation;
  std::printf("channels %d\n", *system.receiverChannels);
  std::printf("field %g\n", *system.systemFieldStrength_T);
  if (system.relativeReceiverNoiseBandwidth) std::printf("noise_bandwidth %g\n", *system.relativeReceiverNoiseBandwidth);
  for (float te : *header.sequenceParameters->TE) std::printf("te %g\n", te);

  std::FILE* out = std::fopen(argv[2], "wb");
  if (!out) return 1;
  for (uint32_t i = 0; i < dataset.getNumberOfAcquisitions(); i++) {
    ISMRMRD::Acquisition acquisition;
    dataset.readAcquisition(i, acquisition);
    std::fwrite(&acquisition.getHead(), sizeof(ISMRMRD::AcquisitionHeader), 1, out);
    std::fwrite(acquisition.getDataPtr(), sizeof(complex_float_t), acquisition.getNumberOfDataElements(), out);
  }
  return std::fclose(out) == 0 ? 0 : 1;
}
