// Reads a zipped task data set by the npm library isoxml and prints what it found as JSON.
const fs = require("fs");
const path = require("path");
const { ISOXMLManager } = require(path.join(process.argv[2], "isoxml"));

const manager = new ISOXMLManager();
const data = new Uint8Array(fs.readFileSync(process.argv[3]));
manager.parseISOXMLFile(data, "application/zip").then(() => {
  const root = manager.rootElement.attributes;
  const task = root.Task[0].attributes;
  const grid = (task.Grid || [])[0];
  console.log(JSON.stringify({
    version: manager.options.version,
    warnings: manager.getWarnings(),
    tasks: root.Task.length,
    field: root.Partfield[0].attributes,
    codes: [task.DefaultTreatmentZoneCode, task.PositionLostTreatmentZoneCode,
      task.OutOfFieldTreatmentZoneCode],
    zones: (task.TreatmentZone || []).map((zone) => ({
      code: zone.attributes.TreatmentZoneCode,
      name: zone.attributes.TreatmentZoneDesignator,
      polygons: (zone.attributes.PolygonTreatmentZoneonly || []).length,
      values: (zone.attributes.ProcessDataVariable || []).map((value) => [
        value.attributes.ProcessDataDDI, value.attributes.ProcessDataValue]),
    })),
    units: (root.ValuePresentation || []).map((one) => one.attributes),
    grid: grid && {
      south: grid.attributes.GridMinimumNorthPosition,
      west: grid.attributes.GridMinimumEastPosition,
      up: grid.attributes.GridCellNorthSize,
      right: grid.attributes.GridCellEastSize,
      columns: grid.attributes.GridMaximumColumn,
      rows: grid.attributes.GridMaximumRow,
      type: grid.attributes.GridType,
      bytes: Buffer.from(grid.binaryData).toString("base64"),
    },
  }, (key, value) => (key === "isoxmlManager" ? undefined : value)));
}).catch((reason) => { console.error(reason); process.exit(1); });
