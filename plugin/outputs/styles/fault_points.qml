<!DOCTYPE qgis PUBLIC 'http://mrcc.com/qgis.dtd' 'SYSTEM'>
<qgis simplifyDrawingTol="1" labelsEnabled="0" simplifyLocal="1" autoRefreshMode="Disabled" simplifyDrawingHints="1" simplifyAlgorithm="0" autoRefreshTime="0" simplifyMaxScale="1" symbologyReferenceScale="-1" minScale="100000000" version="3.40.6-Bratislava" styleCategories="Symbology|Symbology3D|Labeling|MapTips|Rendering|Elevation" hasScaleBasedVisibilityFlag="0" maxScale="0">
  <renderer-3d type="rulebased" layer="">
    <vector-layer-3d-tiling zoom-levels-count="3" show-bounding-boxes="0"/>
    <rules key="{f76e2577-84e4-5ea8-8f99-c87e65ef711f}">
      <rule filter="&quot;constrained&quot; = 'known'" description="Known" key="{154e0a5a-73f9-5e3a-be63-55842f547534}">
        <symbol type="point" shape="sphere" material_type="phong">
          <data alt-clamping="absolute"/>
          <material kd="1" ambient="0,0,0,255,rgb:0,0,0,1" specular="255,255,255,255,rgb:1,1,1,1" diffuse="0,0,0,255,rgb:0,0,0,1" opacity="1" ka="1" ks="1" shininess="0">
            <data-defined-properties>
              <Option type="Map">
                <Option type="QString" name="name" value=""/>
                <Option name="properties"/>
                <Option type="QString" name="type" value="collection"/>
              </Option>
            </data-defined-properties>
          </material>
          <shape-properties>
            <Option type="Map">
              <Option type="QString" name="model" value=""/>
              <Option type="int" name="radius" value="15"/>
            </Option>
          </shape-properties>
          <transform matrix="1 0 0 0 0 1 0 0 0 0 1 0 0 0 0 1"/>
          <symbol type="marker" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="symbol">
            <data_defined_properties>
              <Option type="Map">
                <Option type="QString" name="name" value=""/>
                <Option name="properties"/>
                <Option type="QString" name="type" value="collection"/>
              </Option>
            </data_defined_properties>
            <layer class="SimpleMarker" enabled="1" id="{5ce850df-0fa3-585b-83d8-dd8832fab285}" locked="0" pass="0">
              <Option type="Map">
                <Option type="QString" name="angle" value="0"/>
                <Option type="QString" name="cap_style" value="square"/>
                <Option type="QString" name="color" value="0,0,0,255,rgb:0,0,0,1"/>
                <Option type="QString" name="horizontal_anchor_point" value="1"/>
                <Option type="QString" name="joinstyle" value="bevel"/>
                <Option type="QString" name="name" value="circle"/>
                <Option type="QString" name="offset" value="0,0"/>
                <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
                <Option type="QString" name="offset_unit" value="MM"/>
                <Option type="QString" name="outline_color" value="255,255,255,255,rgb:1,1,1,1"/>
                <Option type="QString" name="outline_style" value="solid"/>
                <Option type="QString" name="outline_width" value="0.2"/>
                <Option type="QString" name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
                <Option type="QString" name="outline_width_unit" value="MM"/>
                <Option type="QString" name="scale_method" value="diameter"/>
                <Option type="QString" name="size" value="2"/>
                <Option type="QString" name="size_map_unit_scale" value="3x:0,0,0,0,0,0"/>
                <Option type="QString" name="size_unit" value="MM"/>
                <Option type="QString" name="vertical_anchor_point" value="1"/>
              </Option>
              <data_defined_properties>
                <Option type="Map">
                  <Option type="QString" name="name" value=""/>
                  <Option name="properties"/>
                  <Option type="QString" name="type" value="collection"/>
                </Option>
              </data_defined_properties>
            </layer>
          </symbol>
        </symbol>
      </rule>
      <rule filter="&quot;constrained&quot; = 'assumed'" description="Assumed" key="{cde50153-8673-55db-b0ec-4cc8c9a6055f}">
        <symbol type="point" shape="sphere" material_type="phong">
          <data alt-clamping="absolute"/>
          <material kd="1" ambient="144,99,0,255,rgb:0.5637140459296559,0.38971541924162661,0,1" specular="255,255,255,255,rgb:1,1,1,1" diffuse="230,159,0,255,rgb:0.90196078431372551,0.62352941176470589,0,1" opacity="1" ka="1" ks="1" shininess="0">
            <data-defined-properties>
              <Option type="Map">
                <Option type="QString" name="name" value=""/>
                <Option name="properties"/>
                <Option type="QString" name="type" value="collection"/>
              </Option>
            </data-defined-properties>
          </material>
          <shape-properties>
            <Option type="Map">
              <Option type="QString" name="model" value=""/>
              <Option type="int" name="radius" value="15"/>
            </Option>
          </shape-properties>
          <transform matrix="1 0 0 0 0 1 0 0 0 0 1 0 0 0 0 1"/>
          <symbol type="marker" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="symbol">
            <data_defined_properties>
              <Option type="Map">
                <Option type="QString" name="name" value=""/>
                <Option name="properties"/>
                <Option type="QString" name="type" value="collection"/>
              </Option>
            </data_defined_properties>
            <layer class="SimpleMarker" enabled="1" id="{e928ce84-8a32-598f-ab32-65fd2cf2485c}" locked="0" pass="0">
              <Option type="Map">
                <Option type="QString" name="angle" value="0"/>
                <Option type="QString" name="cap_style" value="square"/>
                <Option type="QString" name="color" value="230,159,0,255,rgb:0.90196078431372551,0.62352941176470589,0,1"/>
                <Option type="QString" name="horizontal_anchor_point" value="1"/>
                <Option type="QString" name="joinstyle" value="bevel"/>
                <Option type="QString" name="name" value="circle"/>
                <Option type="QString" name="offset" value="0,0"/>
                <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
                <Option type="QString" name="offset_unit" value="MM"/>
                <Option type="QString" name="outline_color" value="255,255,255,255,rgb:1,1,1,1"/>
                <Option type="QString" name="outline_style" value="solid"/>
                <Option type="QString" name="outline_width" value="0.2"/>
                <Option type="QString" name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
                <Option type="QString" name="outline_width_unit" value="MM"/>
                <Option type="QString" name="scale_method" value="diameter"/>
                <Option type="QString" name="size" value="2"/>
                <Option type="QString" name="size_map_unit_scale" value="3x:0,0,0,0,0,0"/>
                <Option type="QString" name="size_unit" value="MM"/>
                <Option type="QString" name="vertical_anchor_point" value="1"/>
              </Option>
              <data_defined_properties>
                <Option type="Map">
                  <Option type="QString" name="name" value=""/>
                  <Option name="properties"/>
                  <Option type="QString" name="type" value="collection"/>
                </Option>
              </data_defined_properties>
            </layer>
          </symbol>
        </symbol>
      </rule>
    </rules>
  </renderer-3d>
  <elevation type="IndividualFeatures" zscale="1" extrusion="0" symbology="Line" zoffset="0" respectLayerSymbol="1" clamping="Absolute" extrusionEnabled="0" showMarkerSymbolInSurfacePlots="0" binding="Vertex">
    <data-defined-properties>
      <Option type="Map">
        <Option type="QString" name="name" value=""/>
        <Option name="properties"/>
        <Option type="QString" name="type" value="collection"/>
      </Option>
    </data-defined-properties>
    <profileLineSymbol>
      <symbol type="line" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="">
        <data_defined_properties>
          <Option type="Map">
            <Option type="QString" name="name" value=""/>
            <Option name="properties"/>
            <Option type="QString" name="type" value="collection"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleLine" enabled="1" id="{2318a768-e15b-57b1-9b07-a1309c5f2c1a}" locked="0" pass="0">
          <Option type="Map">
            <Option type="QString" name="align_dash_pattern" value="0"/>
            <Option type="QString" name="capstyle" value="round"/>
            <Option type="QString" name="customdash" value="5;2"/>
            <Option type="QString" name="customdash_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="customdash_unit" value="MM"/>
            <Option type="QString" name="dash_pattern_offset" value="0"/>
            <Option type="QString" name="dash_pattern_offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="dash_pattern_offset_unit" value="MM"/>
            <Option type="QString" name="draw_inside_polygon" value="0"/>
            <Option type="QString" name="joinstyle" value="round"/>
            <Option type="QString" name="line_color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="line_style" value="solid"/>
            <Option type="QString" name="line_width" value="0.9"/>
            <Option type="QString" name="line_width_unit" value="MM"/>
            <Option type="QString" name="offset" value="0"/>
            <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="offset_unit" value="MM"/>
            <Option type="QString" name="ring_filter" value="0"/>
            <Option type="QString" name="trim_distance_end" value="0"/>
            <Option type="QString" name="trim_distance_end_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="trim_distance_end_unit" value="MM"/>
            <Option type="QString" name="trim_distance_start" value="0"/>
            <Option type="QString" name="trim_distance_start_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="trim_distance_start_unit" value="MM"/>
            <Option type="QString" name="tweak_dash_pattern_on_corners" value="0"/>
            <Option type="QString" name="use_custom_dash" value="0"/>
            <Option type="QString" name="width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option type="QString" name="name" value=""/>
              <Option name="properties"/>
              <Option type="QString" name="type" value="collection"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </profileLineSymbol>
    <profileFillSymbol>
      <symbol type="fill" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="">
        <data_defined_properties>
          <Option type="Map">
            <Option type="QString" name="name" value=""/>
            <Option name="properties"/>
            <Option type="QString" name="type" value="collection"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleFill" enabled="1" id="{0a9810ba-f5bf-5f5f-a0ac-8f2b10a1e094}" locked="0" pass="0">
          <Option type="Map">
            <Option type="QString" name="border_width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="joinstyle" value="bevel"/>
            <Option type="QString" name="offset" value="0,0"/>
            <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="offset_unit" value="MM"/>
            <Option type="QString" name="outline_color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="outline_style" value="solid"/>
            <Option type="QString" name="outline_width" value="0.26"/>
            <Option type="QString" name="outline_width_unit" value="MM"/>
            <Option type="QString" name="style" value="solid"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option type="QString" name="name" value=""/>
              <Option name="properties"/>
              <Option type="QString" name="type" value="collection"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </profileFillSymbol>
    <profileMarkerSymbol>
      <symbol type="marker" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="">
        <data_defined_properties>
          <Option type="Map">
            <Option type="QString" name="name" value=""/>
            <Option name="properties"/>
            <Option type="QString" name="type" value="collection"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleMarker" enabled="1" id="{32fdccac-ae07-5194-9ce5-a0cdb3d1609d}" locked="0" pass="0">
          <Option type="Map">
            <Option type="QString" name="angle" value="0"/>
            <Option type="QString" name="cap_style" value="square"/>
            <Option type="QString" name="color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="horizontal_anchor_point" value="1"/>
            <Option type="QString" name="joinstyle" value="bevel"/>
            <Option type="QString" name="name" value="circle"/>
            <Option type="QString" name="offset" value="0,0"/>
            <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="offset_unit" value="MM"/>
            <Option type="QString" name="outline_color" value="255,255,255,255,rgb:1,1,1,1"/>
            <Option type="QString" name="outline_style" value="solid"/>
            <Option type="QString" name="outline_width" value="0.2"/>
            <Option type="QString" name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="outline_width_unit" value="MM"/>
            <Option type="QString" name="scale_method" value="diameter"/>
            <Option type="QString" name="size" value="1.6"/>
            <Option type="QString" name="size_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="size_unit" value="MM"/>
            <Option type="QString" name="vertical_anchor_point" value="1"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option type="QString" name="name" value=""/>
              <Option name="properties"/>
              <Option type="QString" name="type" value="collection"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </profileMarkerSymbol>
  </elevation>
  <renderer-v2 type="graduatedSymbol" referencescale="-1" enableorderby="0" attr="z" graduatedMethod="GraduatedColor" forceraster="0" symbollevels="0">
    <ranges>
      <range lower="-1000000000.000000000000000" symbol="0" uuid="{bdabd565-d08c-5af9-a004-5ede3294ad16}" upper="1000000000.000000000000000" render="true" label="z"/>
    </ranges>
    <symbols>
      <symbol type="marker" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="0">
        <data_defined_properties>
          <Option type="Map">
            <Option type="QString" name="name" value=""/>
            <Option name="properties"/>
            <Option type="QString" name="type" value="collection"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleMarker" enabled="1" id="{c66cf5e2-fe24-55a0-9b0e-9eeb0ad24b78}" locked="0" pass="0">
          <Option type="Map">
            <Option type="QString" name="angle" value="0"/>
            <Option type="QString" name="cap_style" value="square"/>
            <Option type="QString" name="color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="horizontal_anchor_point" value="1"/>
            <Option type="QString" name="joinstyle" value="bevel"/>
            <Option type="QString" name="name" value="circle"/>
            <Option type="QString" name="offset" value="0,0"/>
            <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="offset_unit" value="MM"/>
            <Option type="QString" name="outline_color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="outline_style" value="solid"/>
            <Option type="QString" name="outline_width" value="0.2"/>
            <Option type="QString" name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="outline_width_unit" value="MM"/>
            <Option type="QString" name="scale_method" value="diameter"/>
            <Option type="QString" name="size" value="1.8"/>
            <Option type="QString" name="size_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="size_unit" value="MM"/>
            <Option type="QString" name="vertical_anchor_point" value="1"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option type="QString" name="name" value=""/>
              <Option type="Map" name="properties">
                <Option type="Map" name="fillColor">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; IS NULL THEN @value WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#ffffff' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
                <Option type="Map" name="name">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN &quot;constrained&quot; IS NULL THEN 'circle' WHEN &quot;constrained&quot; = 'known' THEN 'circle' WHEN &quot;constrained&quot; = 'assumed' THEN 'diamond' WHEN &quot;constrained&quot; = 'out of reach' THEN 'cross2' ELSE 'circle' END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
                <Option type="Map" name="outlineColor">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; IS NULL THEN @value WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#000000' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
                <Option type="Map" name="size">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN &quot;constrained&quot; IS NULL THEN 1.8 WHEN &quot;constrained&quot; = 'known' THEN CASE WHEN @map_scale IS NULL THEN 1.9 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.5 END WHEN &quot;constrained&quot; = 'assumed' THEN CASE WHEN @map_scale IS NULL THEN 2.2 WHEN @map_scale > 30000 THEN 1.2 ELSE 1.8 END WHEN &quot;constrained&quot; = 'out of reach' THEN CASE WHEN @map_scale IS NULL THEN 1.4 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.4 END ELSE CASE WHEN @map_scale IS NULL THEN 0.3 WHEN @map_scale > 30000 THEN 0.4 ELSE 0.7 END END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
              </Option>
              <Option type="QString" name="type" value="collection"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </symbols>
    <source-symbol>
      <symbol type="marker" force_rhr="0" clip_to_extent="1" frame_rate="10" alpha="1" is_animated="0" name="0">
        <data_defined_properties>
          <Option type="Map">
            <Option type="QString" name="name" value=""/>
            <Option name="properties"/>
            <Option type="QString" name="type" value="collection"/>
          </Option>
        </data_defined_properties>
        <layer class="SimpleMarker" enabled="1" id="{c66cf5e2-fe24-55a0-9b0e-9eeb0ad24b78}" locked="0" pass="0">
          <Option type="Map">
            <Option type="QString" name="angle" value="0"/>
            <Option type="QString" name="cap_style" value="square"/>
            <Option type="QString" name="color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="horizontal_anchor_point" value="1"/>
            <Option type="QString" name="joinstyle" value="bevel"/>
            <Option type="QString" name="name" value="circle"/>
            <Option type="QString" name="offset" value="0,0"/>
            <Option type="QString" name="offset_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="offset_unit" value="MM"/>
            <Option type="QString" name="outline_color" value="213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1"/>
            <Option type="QString" name="outline_style" value="solid"/>
            <Option type="QString" name="outline_width" value="0.2"/>
            <Option type="QString" name="outline_width_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="outline_width_unit" value="MM"/>
            <Option type="QString" name="scale_method" value="diameter"/>
            <Option type="QString" name="size" value="1.8"/>
            <Option type="QString" name="size_map_unit_scale" value="3x:0,0,0,0,0,0"/>
            <Option type="QString" name="size_unit" value="MM"/>
            <Option type="QString" name="vertical_anchor_point" value="1"/>
          </Option>
          <data_defined_properties>
            <Option type="Map">
              <Option type="QString" name="name" value=""/>
              <Option type="Map" name="properties">
                <Option type="Map" name="fillColor">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; IS NULL THEN @value WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#ffffff' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
                <Option type="Map" name="name">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN &quot;constrained&quot; IS NULL THEN 'circle' WHEN &quot;constrained&quot; = 'known' THEN 'circle' WHEN &quot;constrained&quot; = 'assumed' THEN 'diamond' WHEN &quot;constrained&quot; = 'out of reach' THEN 'cross2' ELSE 'circle' END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
                <Option type="Map" name="outlineColor">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN @map_scale IS NULL THEN CASE WHEN &quot;constrained&quot; IS NULL THEN @value WHEN &quot;constrained&quot; = 'known' THEN '#000000' WHEN &quot;constrained&quot; = 'assumed' THEN '#000000' WHEN &quot;constrained&quot; = 'out of reach' THEN '#8c8c8c' ELSE '#d55e00' END ELSE @value END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
                <Option type="Map" name="size">
                  <Option type="bool" name="active" value="true"/>
                  <Option type="QString" name="expression" value="CASE WHEN &quot;constrained&quot; IS NULL THEN 1.8 WHEN &quot;constrained&quot; = 'known' THEN CASE WHEN @map_scale IS NULL THEN 1.9 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.5 END WHEN &quot;constrained&quot; = 'assumed' THEN CASE WHEN @map_scale IS NULL THEN 2.2 WHEN @map_scale > 30000 THEN 1.2 ELSE 1.8 END WHEN &quot;constrained&quot; = 'out of reach' THEN CASE WHEN @map_scale IS NULL THEN 1.4 WHEN @map_scale > 30000 THEN 0.9 ELSE 1.4 END ELSE CASE WHEN @map_scale IS NULL THEN 0.3 WHEN @map_scale > 30000 THEN 0.4 ELSE 0.7 END END"/>
                  <Option type="int" name="type" value="3"/>
                </Option>
              </Option>
              <Option type="QString" name="type" value="collection"/>
            </Option>
          </data_defined_properties>
        </layer>
      </symbol>
    </source-symbol>
    <colorramp type="gradient" name="[source]">
      <Option type="Map">
        <Option type="QString" name="color1" value="11,26,58,255,rgb:0.04313725490196078,0.10196078431372549,0.22745098039215686,1"/>
        <Option type="QString" name="color2" value="230,159,0,255,rgb:0.90196078431372551,0.62352941176470589,0,1"/>
        <Option type="QString" name="direction" value="ccw"/>
        <Option type="QString" name="discrete" value="0"/>
        <Option type="QString" name="rampType" value="gradient"/>
        <Option type="QString" name="spec" value="rgb"/>
        <Option type="QString" name="stops" value="0.25;39,64,139,255,rgb:0.15294117647058825,0.25098039215686274,0.54509803921568623,1;rgb;ccw:0.5;138,58,128,255,rgb:0.54117647058823526,0.22745098039215686,0.50196078431372548,1;rgb;ccw:0.75;213,94,0,255,rgb:0.83529411764705885,0.36862745098039218,0,1;rgb;ccw"/>
      </Option>
    </colorramp>
    <classificationMethod id="Custom">
      <symmetricMode symmetrypoint="0" astride="0" enabled="0"/>
      <labelFormat labelprecision="4" trimtrailingzeroes="1" format="%1 - %2"/>
      <parameters>
        <Option/>
      </parameters>
      <extraInformation/>
    </classificationMethod>
    <rotation/>
    <sizescale/>
    <data-defined-properties>
      <Option type="Map">
        <Option type="QString" name="name" value=""/>
        <Option name="properties"/>
        <Option type="QString" name="type" value="collection"/>
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
