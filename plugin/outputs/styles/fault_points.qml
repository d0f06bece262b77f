<!DOCTYPE qgis PUBLIC 'http://mrcc.com/qgis.dtd' 'SYSTEM'>
<qgis simplifyDrawingTol="1" simplifyMaxScale="1" simplifyAlgorithm="0" simplifyDrawingHints="1" simplifyLocal="1" hasScaleBasedVisibilityFlag="0" maxScale="0" autoRefreshTime="0" styleCategories="Symbology|Symbology3D|Labeling|MapTips|Rendering|Elevation" autoRefreshMode="Disabled" minScale="100000000" labelsEnabled="0" version="3.40.6-Bratislava" symbologyReferenceScale="-1">
  <renderer-3d layer="fault_points_87f75405_539d_4f5d_8652_f135f9dc9c05" type="rulebased">
    <vector-layer-3d-tiling show-bounding-boxes="0" zoom-levels-count="3"/>
    <rules key="{f76e2577-84e4-5ea8-8f99-c87e65ef711f}">
      <rule filter="&quot;constrained&quot; = 'known'" description="Known" key="{154e0a5a-73f9-5e3a-be63-55842f547534}">
        <symbol shape="sphere" material_type="phong" type="point">
          <data alt-clamping="absolute"/>
          <material shininess="0" opacity="1" specular="255,255,255,255,rgb:1,1,1,1" ka="1" kd="1" diffuse="0,0,0,255,rgb:0,0,0,1" ks="1" ambient="0,0,0,255,rgb:0,0,0,1">
            <data-defined-properties>
              <Option type="Map">
                <Option name="name" value="" type="QString"/>
                <Option name="properties"/>
                <Option name="type" value="collection" type="QString"/>
              </Option>
            </data-defined-properties>
          </material>
          <shape-properties>
            <Option type="Map">
              <Option name="model" value="" type="QString"/>
              <Option name="radius" value="15" type="int"/>
            </Option>
          </shape-properties>
          <transform matrix="1 0 0 0 0 1 0 0 0 0 1 0 0 0 0 1"/>
          <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="symbol" type="marker" frame_rate="10">
            <data_defined_properties>
              <Option type="Map">
                <Option name="name" value="" type="QString"/>
                <Option name="properties"/>
                <Option name="type" value="collection" type="QString"/>
              </Option>
            </data_defined_properties>
            <layer class="SimpleMarker" locked="0" pass="0" enabled="1" id="{5ce850df-0fa3-585b-83d8-dd8832fab285}">
              <Option type="Map">
                <Option name="angle" value="0" type="QString"/>
                <Option name="cap_style" value="square" type="QString"/>
                <Option name="color" value="183,72,75,255,rgb:0.71764705882352942,0.28235294117647058,0.29411764705882354,1" type="QString"/>
                <Option name="horizontal_anchor_point" value="1" type="QString"/>
                <Option name="joinstyle" value="bevel" type="QString"/>
                <Option name="name" value="circle" type="QString"/>
                <Option name="offset" value="0,0" type="QString"/>
                <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
                <Option name="offset_unit" value="MM" type="QString"/>
                <Option name="outline_color" value="35,35,35,255,rgb:0.13725490196078433,0.13725490196078433,0.13725490196078433,1" type="QString"/>
                <Option name="outline_style" value="solid" type="QString"/>
                <Option name="outline_width" value="0" type="QString"/>
                <Option name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
                <Option name="outline_width_unit" value="MM" type="QString"/>
                <Option name="scale_method" value="diameter" type="QString"/>
                <Option name="size" value="2" type="QString"/>
                <Option name="size_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
                <Option name="size_unit" value="MM" type="QString"/>
                <Option name="vertical_anchor_point" value="1" type="QString"/>
              </Option>
              <data_defined_properties>
                <Option type="Map">
                  <Option name="name" value="" type="QString"/>
                  <Option name="properties"/>
                  <Option name="type" value="collection" type="QString"/>
                </Option>
              </data_defined_properties>
            </layer>
          </symbol>
        </symbol>
      </rule>
      <rule filter="&quot;constrained&quot; = 'assumed'" description="Assumed" key="{cde50153-8673-55db-b0ec-4cc8c9a6055f}">
        <symbol shape="sphere" material_type="phong" type="point">
          <data alt-clamping="absolute"/>
          <material shininess="0" opacity="1" specular="255,255,255,255,rgb:1,1,1,1" ka="1" kd="1" diffuse="230,159,0,255,rgb:0.90196078431372551,0.62352941176470589,0,1" ks="1" ambient="144,99,0,255,rgb:0.5637140459296559,0.38971541924162661,0,1">
            <data-defined-properties>
              <Option type="Map">
                <Option name="name" value="" type="QString"/>
                <Option name="properties"/>
                <Option name="type" value="collection" type="QString"/>
              </Option>
            </data-defined-properties>
          </material>
          <shape-properties>
            <Option type="Map">
              <Option name="model" value="" type="QString"/>
              <Option name="radius" value="15" type="int"/>
            </Option>
          </shape-properties>
          <transform matrix="1 0 0 0 0 1 0 0 0 0 1 0 0 0 0 1"/>
          <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="symbol" type="marker" frame_rate="10">
            <data_defined_properties>
              <Option type="Map">
                <Option name="name" value="" type="QString"/>
                <Option name="properties"/>
                <Option name="type" value="collection" type="QString"/>
              </Option>
            </data_defined_properties>
            <layer class="SimpleMarker" locked="0" pass="0" enabled="1" id="{e928ce84-8a32-598f-ab32-65fd2cf2485c}">
              <Option type="Map">
                <Option name="angle" value="0" type="QString"/>
                <Option name="cap_style" value="square" type="QString"/>
                <Option name="color" value="231,113,72,255,rgb:0.90588235294117647,0.44313725490196076,0.28235294117647058,1" type="QString"/>
                <Option name="horizontal_anchor_point" value="1" type="QString"/>
                <Option name="joinstyle" value="bevel" type="QString"/>
                <Option name="name" value="circle" type="QString"/>
                <Option name="offset" value="0,0" type="QString"/>
                <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
                <Option name="offset_unit" value="MM" type="QString"/>
                <Option name="outline_color" value="35,35,35,255,rgb:0.13725490196078433,0.13725490196078433,0.13725490196078433,1" type="QString"/>
                <Option name="outline_style" value="solid" type="QString"/>
                <Option name="outline_width" value="0" type="QString"/>
                <Option name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
                <Option name="outline_width_unit" value="MM" type="QString"/>
                <Option name="scale_method" value="diameter" type="QString"/>
                <Option name="size" value="2" type="QString"/>
                <Option name="size_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
                <Option name="size_unit" value="MM" type="QString"/>
                <Option name="vertical_anchor_point" value="1" type="QString"/>
              </Option>
              <data_defined_properties>
                <Option type="Map">
                  <Option name="name" value="" type="QString"/>
                  <Option name="properties"/>
                  <Option name="type" value="collection" type="QString"/>
                </Option>
              </data_defined_properties>
            </layer>
          </symbol>
        </symbol>
      </rule>
    </rules>
  </renderer-3d>
  <elevation zoffset="0" symbology="Line" extrusion="0" showMarkerSymbolInSurfacePlots="0" extrusionEnabled="0" binding="Vertex" zscale="1" respectLayerSymbol="1" type="IndividualFeatures" clamping="Absolute">
    <data-defined-properties>
      <Option type="Map">
        <Option name="name" value="" type="QString"/>
        <Option name="properties"/>
        <Option name="type" value="collection" type="QString"/>
      </Option>
    </data-defined-properties>
    <profileLineSymbol>
      <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="" type="line" frame_rate="10">
        <data_defined_properties>
          <Option type="Map">
            <Option name="name" value="" type="QString"/>
            <Option name="properties"/>
            <Option name="type" value="collection" type="QString"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleLine" locked="0" pass="0" enabled="1" id="{2318a768-e15b-57b1-9b07-a1309c5f2c1a}">
          <Option type="Map">
            <Option name="align_dash_pattern" value="0" type="QString"/>
            <Option name="capstyle" value="square" type="QString"/>
            <Option name="customdash" value="5;2" type="QString"/>
            <Option name="customdash_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="customdash_unit" value="MM" type="QString"/>
            <Option name="dash_pattern_offset" value="0" type="QString"/>
            <Option name="dash_pattern_offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="dash_pattern_offset_unit" value="MM" type="QString"/>
            <Option name="draw_inside_polygon" value="0" type="QString"/>
            <Option name="joinstyle" value="bevel" type="QString"/>
            <Option name="line_color" value="232,113,141,255,rgb:0.90980392156862744,0.44313725490196076,0.55294117647058827,1" type="QString"/>
            <Option name="line_style" value="solid" type="QString"/>
            <Option name="line_width" value="0.6" type="QString"/>
            <Option name="line_width_unit" value="MM" type="QString"/>
            <Option name="offset" value="0" type="QString"/>
            <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="offset_unit" value="MM" type="QString"/>
            <Option name="ring_filter" value="0" type="QString"/>
            <Option name="trim_distance_end" value="0" type="QString"/>
            <Option name="trim_distance_end_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="trim_distance_end_unit" value="MM" type="QString"/>
            <Option name="trim_distance_start" value="0" type="QString"/>
            <Option name="trim_distance_start_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="trim_distance_start_unit" value="MM" type="QString"/>
            <Option name="tweak_dash_pattern_on_corners" value="0" type="QString"/>
            <Option name="use_custom_dash" value="0" type="QString"/>
            <Option name="width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option name="name" value="" type="QString"/>
              <Option name="properties"/>
              <Option name="type" value="collection" type="QString"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </profileLineSymbol>
    <profileFillSymbol>
      <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="" type="fill" frame_rate="10">
        <data_defined_properties>
          <Option type="Map">
            <Option name="name" value="" type="QString"/>
            <Option name="properties"/>
            <Option name="type" value="collection" type="QString"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleFill" locked="0" pass="0" enabled="1" id="{0a9810ba-f5bf-5f5f-a0ac-8f2b10a1e094}">
          <Option type="Map">
            <Option name="border_width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="color" value="232,113,141,255,rgb:0.90980392156862744,0.44313725490196076,0.55294117647058827,1" type="QString"/>
            <Option name="joinstyle" value="bevel" type="QString"/>
            <Option name="offset" value="0,0" type="QString"/>
            <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="offset_unit" value="MM" type="QString"/>
            <Option name="outline_color" value="166,81,101,255,rgb:0.64985122453650723,0.31651789120317386,0.39496452277409017,1" type="QString"/>
            <Option name="outline_style" value="solid" type="QString"/>
            <Option name="outline_width" value="0.2" type="QString"/>
            <Option name="outline_width_unit" value="MM" type="QString"/>
            <Option name="style" value="solid" type="QString"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option name="name" value="" type="QString"/>
              <Option name="properties"/>
              <Option name="type" value="collection" type="QString"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </profileFillSymbol>
    <profileMarkerSymbol>
      <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="" type="marker" frame_rate="10">
        <data_defined_properties>
          <Option type="Map">
            <Option name="name" value="" type="QString"/>
            <Option name="properties"/>
            <Option name="type" value="collection" type="QString"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleMarker" locked="0" pass="0" enabled="1" id="{32fdccac-ae07-5194-9ce5-a0cdb3d1609d}">
          <Option type="Map">
            <Option name="angle" value="0" type="QString"/>
            <Option name="cap_style" value="square" type="QString"/>
            <Option name="color" value="232,113,141,255,rgb:0.90980392156862744,0.44313725490196076,0.55294117647058827,1" type="QString"/>
            <Option name="horizontal_anchor_point" value="1" type="QString"/>
            <Option name="joinstyle" value="bevel" type="QString"/>
            <Option name="name" value="diamond" type="QString"/>
            <Option name="offset" value="0,0" type="QString"/>
            <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="offset_unit" value="MM" type="QString"/>
            <Option name="outline_color" value="166,81,101,255,rgb:0.64985122453650723,0.31651789120317386,0.39496452277409017,1" type="QString"/>
            <Option name="outline_style" value="solid" type="QString"/>
            <Option name="outline_width" value="0.2" type="QString"/>
            <Option name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="outline_width_unit" value="MM" type="QString"/>
            <Option name="scale_method" value="diameter" type="QString"/>
            <Option name="size" value="3" type="QString"/>
            <Option name="size_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="size_unit" value="MM" type="QString"/>
            <Option name="vertical_anchor_point" value="1" type="QString"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option name="name" value="" type="QString"/>
              <Option name="properties"/>
              <Option name="type" value="collection" type="QString"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </profileMarkerSymbol>
  </elevation>
  <renderer-v2 symbollevels="0" attr="z" type="graduatedSymbol" enableorderby="0" graduatedMethod="GraduatedColor" forceraster="0" referencescale="-1">
    <ranges>
      <range label="z" upper="1000000000.000000000000000" render="true" uuid="{bdabd565-d08c-5af9-a004-5ede3294ad16}" lower="-1000000000.000000000000000" symbol="0"/>
    </ranges>
    <symbols>
      <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="0" type="marker" frame_rate="10">
        <data_defined_properties>
          <Option type="Map">
            <Option name="name" value="" type="QString"/>
            <Option name="properties"/>
            <Option name="type" value="collection" type="QString"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleMarker" locked="0" pass="0" enabled="1" id="{c66cf5e2-fe24-55a0-9b0e-9eeb0ad24b78}">
          <Option type="Map">
            <Option name="angle" value="0" type="QString"/>
            <Option name="cap_style" value="square" type="QString"/>
            <Option name="color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1" type="QString"/>
            <Option name="horizontal_anchor_point" value="1" type="QString"/>
            <Option name="joinstyle" value="bevel" type="QString"/>
            <Option name="name" value="circle" type="QString"/>
            <Option name="offset" value="0,0" type="QString"/>
            <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="offset_unit" value="MM" type="QString"/>
            <Option name="outline_color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1" type="QString"/>
            <Option name="outline_style" value="solid" type="QString"/>
            <Option name="outline_width" value="0.2" type="QString"/>
            <Option name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="outline_width_unit" value="MM" type="QString"/>
            <Option name="scale_method" value="diameter" type="QString"/>
            <Option name="size" value="1" type="QString"/>
            <Option name="size_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="size_unit" value="MM" type="QString"/>
            <Option name="vertical_anchor_point" value="1" type="QString"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option name="name" value="" type="QString"/>
              <Option name="properties" type="Map">
                <Option name="fillColor" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#ffffff' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
                <Option name="name" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN &quot;constrained&quot; = 'known' THEN 'circle' WHEN &quot;constrained&quot; = 'assumed' THEN 'diamond' WHEN &quot;constrained&quot; = 'out of reach' THEN 'cross2' ELSE 'circle' END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
                <Option name="outlineColor" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#000000' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
                <Option name="size" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN &quot;constrained&quot; = 'known' THEN CASE WHEN @map_scale IS NULL THEN 1.5 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.5 END WHEN &quot;constrained&quot; = 'assumed' THEN CASE WHEN @map_scale IS NULL THEN 1.8 WHEN @map_scale > 30000 THEN 1.2 ELSE 1.8 END WHEN &quot;constrained&quot; = 'out of reach' THEN CASE WHEN @map_scale IS NULL THEN 1.4 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.4 END ELSE CASE WHEN @map_scale IS NULL THEN 0.3 WHEN @map_scale > 30000 THEN 0.4 ELSE 0.7 END END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
              </Option>
              <Option name="type" value="collection" type="QString"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </symbols>
    <source-symbol>
      <symbol alpha="1" force_rhr="0" clip_to_extent="1" is_animated="0" name="0" type="marker" frame_rate="10">
        <data_defined_properties>
          <Option type="Map">
            <Option name="name" value="" type="QString"/>
            <Option name="properties"/>
            <Option name="type" value="collection" type="QString"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleMarker" locked="0" pass="0" enabled="1" id="{c66cf5e2-fe24-55a0-9b0e-9eeb0ad24b78}">
          <Option type="Map">
            <Option name="angle" value="0" type="QString"/>
            <Option name="cap_style" value="square" type="QString"/>
            <Option name="color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1" type="QString"/>
            <Option name="horizontal_anchor_point" value="1" type="QString"/>
            <Option name="joinstyle" value="bevel" type="QString"/>
            <Option name="name" value="circle" type="QString"/>
            <Option name="offset" value="0,0" type="QString"/>
            <Option name="offset_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="offset_unit" value="MM" type="QString"/>
            <Option name="outline_color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1" type="QString"/>
            <Option name="outline_style" value="solid" type="QString"/>
            <Option name="outline_width" value="0.2" type="QString"/>
            <Option name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="outline_width_unit" value="MM" type="QString"/>
            <Option name="scale_method" value="diameter" type="QString"/>
            <Option name="size" value="1" type="QString"/>
            <Option name="size_map_unit_scale" value="3x:0,0,0,0,0,0" type="QString"/>
            <Option name="size_unit" value="MM" type="QString"/>
            <Option name="vertical_anchor_point" value="1" type="QString"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option name="name" value="" type="QString"/>
              <Option name="properties" type="Map">
                <Option name="fillColor" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#ffffff' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
                <Option name="name" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN &quot;constrained&quot; = 'known' THEN 'circle' WHEN &quot;constrained&quot; = 'assumed' THEN 'diamond' WHEN &quot;constrained&quot; = 'out of reach' THEN 'cross2' ELSE 'circle' END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
                <Option name="outlineColor" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#000000' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
                <Option name="size" type="Map">
                  <Option name="active" value="true" type="bool"/>
                  <Option name="expression" value="CASE WHEN &quot;constrained&quot; = 'known' THEN CASE WHEN @map_scale IS NULL THEN 1.5 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.5 END WHEN &quot;constrained&quot; = 'assumed' THEN CASE WHEN @map_scale IS NULL THEN 1.8 WHEN @map_scale > 30000 THEN 1.2 ELSE 1.8 END WHEN &quot;constrained&quot; = 'out of reach' THEN CASE WHEN @map_scale IS NULL THEN 1.4 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.4 END ELSE CASE WHEN @map_scale IS NULL THEN 0.3 WHEN @map_scale > 30000 THEN 0.4 ELSE 0.7 END END" type="QString"/>
                  <Option name="type" value="3" type="int"/>
                </Option>
              </Option>
              <Option name="type" value="collection" type="QString"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </source-symbol>
    <colorramp name="[source]" type="gradient">
      <Option type="Map">
        <Option name="color1" value="11,26,58,255,rgb:0.04313725490196078,0.10196078431372549,0.22745098039215686,1" type="QString"/>
        <Option name="color2" value="230,159,0,255,rgb:0.90196078431372551,0.62352941176470589,0,1" type="QString"/>
        <Option name="direction" value="ccw" type="QString"/>
        <Option name="discrete" value="0" type="QString"/>
        <Option name="rampType" value="gradient" type="QString"/>
        <Option name="spec" value="rgb" type="QString"/>
        <Option name="stops" value="0.25;39,64,139,255,rgb:0.15294117647058825,0.25098039215686274,0.54509803921568623,1;rgb;ccw:0.5;138,58,128,255,rgb:0.54117647058823526,0.22745098039215686,0.50196078431372548,1;rgb;ccw:0.75;213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1;rgb;ccw" type="QString"/>
      </Option>
    </colorramp>
    <classificationMethod id="Custom">
      <symmetricMode symmetrypoint="0" enabled="0" astride="0"/>
      <labelFormat trimtrailingzeroes="1" labelprecision="4" format="%1 - %2"/>
      <parameters>
        <Option/>
      </parameters>
      <extraInformation/>
    </classificationMethod>
    <rotation/>
    <sizescale/>
    <data-defined-properties>
      <Option type="Map">
        <Option name="name" value="" type="QString"/>
        <Option name="properties"/>
        <Option name="type" value="collection" type="QString"/>
      </Option>
    </data-defined-properties>
  </renderer-v2>
  <selection mode="Default">
    <selectionColor invalid="1"/>
  </selection>
  <blendMode>0</blendMode>
  <featureBlendMode>0</featureBlendMode>
  <layerOpacity>1</layerOpacity>
  <mapTip enabled="1">&lt;b>Fault at z [% round("z", 1) %]&lt;/b>, [% "constrained" %]&lt;br>dip [% round("dip", 1) %]°, strip [% "strip" %], sigma [% coalesce(round("sigma_z", 1), 'not known') %]</mapTip>
  <layerGeometryType>0</layerGeometryType>
</qgis>
