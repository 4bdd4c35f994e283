// Reads a style by mappings compiled from the OGC schema of SLD 1.0.0 and writes it anew: what the
// schema does not know is lost, and elements come out in the schema's order.
const { readFileSync } = require("fs");
const { Jsonix } = require("jsonix");
const ogc = require("ogc-schemas");
const { XLink_1_0 } = require("w3c-schemas");

const context = new Jsonix.Context([
  ogc.SLD_1_0_0, ogc.Filter_1_0_0, ogc.GML_2_1_2, XLink_1_0,
]);
const read = context.createUnmarshaller().unmarshalString(readFileSync(process.argv[2], "utf-8"));
console.log(context.createMarshaller().marshalString(read));
