import { type Acquisition, acquiredLines } from "./acquisition.js";

/** The header of the raw-data standard (ISMRMRD, XML), elements in the order of its schema. */
export function headerXml(a: Acquisition): string {
  const { readoutOversampling, fovMm, matrix, sliceThicknessMm: thickness, noise } = a;
  const space = (tag: string, x: number, fovX: number) =>
    `<${tag}><matrixSize><x>${x}</x><y>${matrix.y}</y><z>1</z></matrixSize>` +
    `<fieldOfView_mm><x>${fovX}</x><y>${fovMm.y}</y><z>${thickness}</z></fieldOfView_mm></${tag}>`;
  const limit = (name: string, length: number, center = 0) =>
    `<${name}><minimum>0</minimum><maximum>${length - 1}</maximum><center>${center}</center></${name}>`;
  const noiseBandwidth =
    noise.readouts > 0
      ? `<relativeReceiverNoiseBandwidth>${noise.relativeReceiverNoiseBandwidth}</relativeReceiverNoiseBandwidth>`
      : "";
  return [
    '<?xml version="1.0"?>\n<ismrmrdHeader xmlns="http://www.ismrm.org/ISMRMRD">',
    `<acquisitionSystemInformation><systemVendor>simulated</systemVendor><systemModel>${a.phantom}</systemModel>`,
    `<systemFieldStrength_T>${a.fieldT}</systemFieldStrength_T>${noiseBandwidth}`,
    `<receiverChannels>${a.coils}</receiverChannels></acquisitionSystemInformation>`,
    `<experimentalConditions><H1resonanceFrequency_Hz>${a.resonanceHz}</H1resonanceFrequency_Hz></experimentalConditions>`,
    "<encoding>",
    space("encodedSpace", a.encodedSamples, fovMm.x * readoutOversampling),
    space("reconSpace", matrix.x, fovMm.x),
    "<encodingLimits>",
    limit("kspace_encoding_step_1", acquiredLines(a), Math.floor(matrix.y / 2) - a.firstLine),
    limit("kspace_encoding_step_2", 1),
    limit("average", a.averages),
    limit("slice", a.sliceOrder.length),
    limit("contrast", a.echoTimesSeconds.length),
    limit("repetition", a.repetitions),
    "</encodingLimits><trajectory>cartesian</trajectory></encoding>",
    `<sequenceParameters>${a.echoTimesSeconds.map((t) => `<TE>${milliseconds(t)}</TE>`).join("")}</sequenceParameters>`,
    `<userParameters><userParameterLong><name>seed</name><value>${a.seed}</value></userParameterLong></userParameters>`,
    "</ismrmrdHeader>",
  ].join("");
}

/** 12 digits hide what binary fractions add (0.0023 s is not 2.3000000000000003 ms). */
function milliseconds(seconds: number): number {
  return Number((seconds * 1e3).toPrecision(12));
}
