import * as core from "echarts/core";
import { LineChart, BarChart, ScatterChart, HeatmapChart, BoxplotChart, CustomChart } from "echarts/charts";
import { GridComponent, TooltipComponent, LegendComponent, MarkLineComponent, MarkAreaComponent, VisualMapComponent, AriaComponent, DatasetComponent } from "echarts/components";
import { LabelLayout } from "echarts/features";
import { SVGRenderer, CanvasRenderer } from "echarts/renderers";
core.use([LineChart, BarChart, ScatterChart, HeatmapChart, BoxplotChart, CustomChart, GridComponent, TooltipComponent, LegendComponent,
  MarkLineComponent, MarkAreaComponent, VisualMapComponent, AriaComponent, DatasetComponent, LabelLayout, SVGRenderer, CanvasRenderer]);
export * from "echarts/core";
